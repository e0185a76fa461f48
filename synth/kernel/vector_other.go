//go:build !amd64 || purego

package kernel

var useVector = false

func combineVector([]float32, [][]float32, []float32) int { return 0 }

func carryVector([]float32, *[8][]float32, *[8]float32, *[16]float32, [2]float32, bool) bool {
	return false
}

func transposeVector(_, _ []float32, _ int) bool { return false }

func assembleVector(_, _ []float32, _ int, _ []float32, _ []int32, _ bool) bool { return false }

func passVector([]float32, *stage, int) bool { return false }

func profileVector(_, _ []float32, _, _, _ *[Lanes]float32) bool { return false }

func cosinesVector(_, _, _ []float32, _ *[Lanes]float32, _ float32) bool { return false }
