module modelmend/bench

go 1.26

require modelmend v0.0.0

require (
	github.com/andybalholm/brotli v1.1.0 // indirect
	github.com/google/uuid v1.6.0 // indirect
	github.com/klauspost/compress v1.18.0 // indirect
	github.com/parquet-go/parquet-go v0.25.1 // indirect
	github.com/pierrec/lz4/v4 v4.1.21 // indirect
	golang.org/x/sys v0.21.0 // indirect
)

replace modelmend => ../..
