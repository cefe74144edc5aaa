//go:build !race

package dataset

const raceDetector = false
