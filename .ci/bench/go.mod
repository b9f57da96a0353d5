module modelmend/bench

go 1.26

require modelmend v0.0.0

require github.com/klauspost/compress v1.18.0 // indirect

replace modelmend => ../..
