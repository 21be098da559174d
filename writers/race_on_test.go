//go:build race

package writers

// raceDetector takes several times the memory.
const raceDetector = true
