//go:build race

package main

// raceDetector takes several times the memory.
const raceDetector = true
