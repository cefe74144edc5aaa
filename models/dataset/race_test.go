//go:build race

package dataset

// raceDetector: what a test allocates is then mostly the detector's.
const raceDetector = true
