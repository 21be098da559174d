// Command catenrich adds derived cosmological columns to survey catalogues.
//
// The commands are in one file each; app.go runs them and turns errors into
// exit codes; formats.go pairs readers with writers; settings.go maps flags to
// keys of the job file. Everything else is in pipeline.
package main

import "os"

func main() {
	os.Exit(run(os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}
