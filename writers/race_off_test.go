//go:build !race

package writers

const raceDetector = false
