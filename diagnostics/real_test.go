package diagnostics

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"
)

// Numbers are written as encoding/json writes them.
func TestRealAsJSON(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	check := func(x float64) {
		want, err := json.Marshal(x)
		if err != nil {
			t.Fatal(err)
		}
		if got, err := Real(x).MarshalJSON(); err != nil || string(got) != string(want) {
			t.Errorf("%s, %v, want %s", got, err, want)
		}
	}
	for _, x := range []float64{0, math.Copysign(0, -1), 1, -1, 1e-6, 9.99e-7, 1e-9, -1e-10, 1e20, 1e21, -1e21, 1e100, 1e-100, math.MaxFloat64, math.SmallestNonzeroFloat64} {
		check(x)
	}
	for range 20000 {
		if x := math.Float64frombits(rng.Uint64()); !math.IsNaN(x) && !math.IsInf(x, 0) {
			check(x)
		}
		check(rng.NormFloat64() * math.Pow(10, float64(rng.IntN(50)-25)))
	}
	for _, x := range []float64{math.NaN(), math.Inf(1), math.Inf(-1)} {
		if got, err := Real(x).MarshalJSON(); err != nil || string(got) != "null" {
			t.Errorf("%g is %s, %v", x, got, err)
		}
	}
}
