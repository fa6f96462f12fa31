package wafermap

import (
	"cmp"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

func TestAscendingIsTheStableSort(t *testing.T) {
	random := rand.New(rand.NewPCG(8, 1))
	for n := range 300 {
		values := make([]float64, n)
		for i := range values {
			switch random.IntN(6) {
			case 0:
				values[i] = float64(random.IntN(3)) - 1
			case 1:
				values[i] = math.Inf(random.IntN(2)*2 - 1)
			case 2:
				values[i] = math.Copysign(0, float64(random.IntN(2))-0.5)
			case 3:
				values[i] = math.Float64frombits(uint64(random.IntN(1000))) * float64(random.IntN(3)-1) // below the normal range
			default:
				values[i] = random.NormFloat64() * math.Exp(30*random.NormFloat64())
			}
		}
		want := make([]int32, n)
		for i := range want {
			want[i] = int32(i)
		}
		slices.SortStableFunc(want, func(a, b int32) int { return cmp.Compare(values[a], values[b]) })
		if got := ascending(values); !slices.Equal(got, want) {
			t.Fatalf("%v: order %v, want %v", values, got, want)
		}
	}
	if got := ascending([]float64{math.NaN(), 1, math.Inf(1), math.NaN(), -1}); !slices.Equal(got, []int32{4, 1, 2, 0, 3}) {
		t.Errorf("NaN: %v", got)
	}
}
