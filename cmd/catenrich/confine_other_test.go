//go:build !linux

package main

// asked runs the program; what a test may ask of it only Linux can do.
func asked() { main() }
