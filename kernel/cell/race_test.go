//go:build race

package cell

func init() { raceDetector = true }
