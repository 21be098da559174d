// Package interop holds no code of the product: its tests let other people's
// Parquet libraries make inputs and read outputs. It is a module of its own,
// because one of the libraries needs cgo and another makes imports ambiguous
// that the product needs. Run it from here: go test ./...
//
// matrix_test.go grafts onto every file of the matrix and has each library
// read the result; makers_test.go makes the files; judges_test.go reads them.
package interop
