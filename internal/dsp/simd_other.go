//go:build !amd64

package dsp

const hasAVX2 = false

// Never called.
func bankAVX2(*Bank, int, int)                                                       {}
func valuesAVX2(*float64, *int32, int, float64, float64)                             {}
func extremesAVX2(*int32, int) (int32, int32)                                        { return 0, 0 }
func linesAVX2(*LineFit, *float64, *float64, *float64, int, *float64, *float64, int) {}
func sumsAVX2(*LineFit, *[8][4]float64, *float64, int, *float64, int)                {}
func levelsAVX2(*Bins, *float64, *float64, *float64, *float64, *float64)             {}
func momentsAVX2(*Moments, *int32, int)                                              {}
func logsAVX2(*float64, *float64, int) int                                           { return 0 }
func expsAVX2(*float64, *float64, int) int                                           { return 0 }
func rectifyAVX2(*float64, *float64, int, int)                                       {}
