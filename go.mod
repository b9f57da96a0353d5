module modelmend

go 1.26

require (
	github.com/go-echarts/go-echarts/v2 v2.6.7
	github.com/klauspost/compress v1.18.0
	github.com/parquet-go/parquet-go v0.25.1
	github.com/santhosh-tekuri/jsonschema/v6 v6.0.3
	github.com/spf13/cobra v1.10.2
	go.yaml.in/yaml/v3 v3.0.5
	gonum.org/v1/gonum v0.17.0
)

require (
	github.com/andybalholm/brotli v1.1.0 // indirect
	github.com/google/uuid v1.6.0 // indirect
	github.com/inconshreveable/mousetrap v1.1.0 // indirect
	github.com/pierrec/lz4/v4 v4.1.21 // indirect
	github.com/spf13/pflag v1.0.9 // indirect
	golang.org/x/sys v0.21.0 // indirect
	golang.org/x/text v0.23.0 // indirect
)
