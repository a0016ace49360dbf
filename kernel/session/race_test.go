//go:build race

package session

func init() { raceDetector = true }
