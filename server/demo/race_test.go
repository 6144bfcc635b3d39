//go:build race

package demo

func init() { raceDetector = true }
