//go:build !amd64 || purego

package kernel

var useVector = false

func combineVector([]float32, [][]float32, []float32) int { return 0 }

func profileVector(_, _ []float32, _, _, _ float32) int { return 0 }

func cosinesVector(_, _, _ []float32, _, _ float32) int { return 0 }
