module bandgrid

go 1.26.0

require (
	github.com/klauspost/compress v1.20.4 // indirect
	github.com/spf13/pflag v1.1.0 // indirect
	golang.org/x/image v0.48.0 // indirect
	golang.org/x/sys v0.50.0 // indirect
	golang.org/x/text v0.44.0 // indirect
	gonum.org/v1/gonum v0.17.0 // indirect
)
