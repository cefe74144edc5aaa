//go:build race

package workbook

// raceDetector: its own memory counts.
const raceDetector = true
