package calibration

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"

	"onebarrier/diagnostics"
	"onebarrier/models/fit"
)

// run simulates a cell, with fewer sets under -short.
func run(t testing.TB, c Cell, sets int) *Counts {
	t.Helper()
	if testing.Short() {
		sets /= 4
	}
	n, err := c.Run(context.Background(), Settings{Sets: sets, Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// sigmas is how far a rate may lie from what it should be, in binomial standard
// errors: chance goes beyond it once in 16,000 figures.
const sigmas = 4

// off says how a rate contradicts the range that it should lie in, "" if it does
// not.
func off(f Figure, low, high float64) string {
	within := func(edge, sign float64) bool {
		return sign*(f.Value-edge) <= sigmas*math.Sqrt(edge*(1-edge)/float64(f.Trials))
	}
	if within(high, 1) && (low == 0 || within(low, -1)) {
		return ""
	}
	return fmt.Sprintf("%.4f of %d sets, want %g to %g", f.Value, f.Trials, low, high)
}

// The expected rates are the levels that the tests claim: the 5 % of a test that is
// exact for Gaussian errors, 95 % of its intervals, and upper bounds where
// it is not exact. The full study is cmd/calibration.
func TestRates(t *testing.T) {
	for _, c := range []struct {
		name string
		cell Cell
		sets int
		want map[Event][2]float64
	}{
		{"relative N=4", Cell{Range: Narrow, N: 4}, 2000,
			map[Event][2]float64{Curved: {.05, .05}, CoverN: {.95, .95}, CoverE: {.95, .95}, SecondBarrier: {.05, .05}, Either: {.05, .10}}},
		{"relative N=5", Cell{Range: Wide, N: 5}, 2000,
			map[Event][2]float64{Curved: {.05, .05}, CoverN: {.95, .95}, CoverE: {.95, .95}, SecondBarrier: {.05, .05}, Either: {.05, .10}}},
		{"relative N=8, n=1", Cell{Range: Wide, N: 8, Truth: Truth{Exponent: 1}, Lean: true}, 1000,
			map[Event][2]float64{Beyond: {0, .05}, CoverN: {.95, .95}, CoverLocMin: {.95, .95}, CoverLocMax: {.95, .95}}},
		{"scaled N=6", Cell{Range: Narrow, N: 6, Uneven: true, Stated: 1 / 1.5, Model: fit.Scaled, Lean: true}, 2000,
			map[Event][2]float64{Curved: {.05, .05}, CoverN: {.95, .95}, CoverE: {.95, .95}}},
		{"stated N=6", Cell{Range: Narrow, N: 6, Uneven: true, Stated: 1}, 2000,
			map[Event][2]float64{Curved: {.02, .055}, Rescaled: {0, .05}}},
		{"absolute N=8", Cell{Range: Narrow, N: 8, Absolute: true, Model: fit.Absolute, Lean: true}, 300,
			map[Event][2]float64{Curved: {.02, .06}}},
		{"repeats N=5", Cell{Range: Narrow, N: 5, Repeats: Triplets, Thermostat: true, Lean: true}, 1500,
			map[Event][2]float64{Curved: {.05, .05}, Pointwise: {.10, .30}}},
	} {
		n := run(t, c.cell, c.sets)
		for e, w := range c.want {
			f := n.Rate(e)
			if f.Trials == 0 {
				t.Errorf("%s: %s was never tried", c.name, e)
			}
			if s := off(f, w[0], w[1]); s != "" {
				t.Errorf("%s: %s: %s", c.name, e, s)
			}
		}
	}
}

// The rates above must be able to fail: data that are not straight fail them, and
// so does Student's t with its normal quantile in place (at N = 5, ν = 2 the true
// level of ±1.96 is 2 P(t₂ > 1.96) = 0.189; R: 2*pt(-1.96, 2)).
func TestRatesCanFail(t *testing.T) {
	bent := run(t, Cell{Range: Narrow, N: 8, Truth: Truth{Exponent: 40}, Lean: true}, 200)
	if off(bent.Rate(Curved), .05, .05) == "" {
		t.Error("a strong curve passes for 5 % of false alarms")
	}
	if off(Figure{Value: .189, Trials: 2000}, .05, .05) == "" || off(Figure{Value: .05, Trials: 2000}, .05, .05) != "" {
		t.Error("the normal quantile at N = 5 must be told from 5 %")
	}
	if off(Figure{Value: math.NaN(), Trials: 2000}, .05, .05) == "" || off(Figure{Value: .01, Trials: 2000}, .05, .05) == "" {
		t.Error("NaN and too few alarms must fail")
	}
}

// The densities compared are those of k: AICc tells relative from absolute errors,
// and the answer does not change when k is written in another unit. Dropping the
// Jacobian term -Σ ln k shifts AICc by 2Σ ln k, here by hundreds.
func TestErrorModelIsToldWhateverTheUnit(t *testing.T) {
	for _, inK := range []bool{false, true} {
		for _, level := range []float64{-15, 15} {
			c := Cell{Range: Narrow, N: 8, Truth: Truth{Level: level}, Absolute: inK, Lean: true, Compare: true}
			// About 0.91 of relative and 0.98 of absolute errors in the full study.
			if s := off(run(t, c, 100).Rate(TrueErrorModel), 0.9, 1); s != "" {
				t.Errorf("errors in k %v, ln k near %g: right error model in %s", inK, middleLnK+level, s)
			}
		}
	}
}

// Bootstrap-t holds its level, the percentile interval is too short at small N:
// what is printed beside them says so.
func TestBootstrapCoverage(t *testing.T) {
	c := Cell{Range: Narrow, N: 8, Resamples: 199, Lean: true}
	n := run(t, c, 400)
	for _, e := range []Event{BootstrapTE, BootstrapTN, BootstrapTChange} {
		if s := off(n.Rate(e), .92, .98); s != "" {
			t.Errorf("%s: %s", e, s)
		}
	}
	// ΔE is a multiple of n, whatever makes the interval: the study prints one row
	// for both.
	for ofN, change := range map[Event]Event{CoverN: CoverChange, BootstrapTN: BootstrapTChange, PercentileN: PercentileChange, BCaN: BCaChange} {
		if n.Hits[ofN] != n.Hits[change] {
			t.Errorf("%s and %s: %d intervals of n hold the truth and %d of ΔE", ofN, change, n.Hits[ofN], n.Hits[change])
		}
	}
	if f := n.Rate(PercentileN); !(f.Value < n.Rate(BootstrapTN).Value) {
		t.Errorf("percentile covers %.3f, no less than bootstrap-t", f.Value)
	}
}

// Counts do not depend on the number of workers, and the streams differ from set to
// set, from cell to cell and with the seed.
func TestStreams(t *testing.T) {
	c := Cell{Range: Narrow, N: 6, Uneven: true, Stated: 1}
	var counts []*Counts
	for _, workers := range []int{1, 3} {
		n, err := c.Run(context.Background(), Settings{Sets: 150, Seed: 7, Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		counts = append(counts, n)
	}
	if !reflect.DeepEqual(counts[0], counts[1]) {
		t.Error("counts depend on the number of workers")
	}
	first := map[float64]bool{}
	other := c
	other.N = 8
	for _, k := range []float64{
		c.draw(c.stream(1, 0)).Points[0].K, c.draw(c.stream(1, 1)).Points[0].K,
		c.draw(c.stream(2, 0)).Points[0].K, other.draw(other.stream(1, 0)).Points[0].K,
	} {
		first[k] = true
	}
	if len(first) != 4 {
		t.Error("two streams are alike")
	}
}

// Leaving candidates out must leave the verdict alone where Lean says so.
func TestLeanDecidesAlike(t *testing.T) {
	for _, c := range []Cell{
		{Range: Narrow, N: 6, Truth: Truth{Exponent: 20}},
		{Range: Narrow, N: 6, Uneven: true, Stated: 1, Model: fit.Scaled},
		{Range: Narrow, N: 6, Absolute: true, Model: fit.Absolute},
		{Range: Narrow, N: 5, Repeats: Triplets, Thermostat: true},
	} {
		lean := c
		lean.Lean = true
		designs := new(diagnostics.DesignCache)
		for i := range 20 {
			set := c.draw(c.stream(1, i))
			a, err := diagnostics.Screen(set, c.options(designs))
			if err != nil {
				t.Fatal(err)
			}
			b, err := diagnostics.Screen(set, lean.options(designs))
			if err != nil {
				t.Fatal(err)
			}
			if a.State() != b.State() || a.Exponent != b.Exponent && !math.IsNaN(a.Exponent.PValue) && a.Exponent.PValue != b.Exponent.PValue {
				t.Errorf("%+v, set %d: %s with all candidates, %s with two", c, i, a.State(), b.State())
			}
		}
	}
}

// The truth's E_loc is the derivative of its ln k: -d ln k/d(1/RT), by central
// differences.
func TestTruth(t *testing.T) {
	for _, tr := range []Truth{{}, {Exponent: 3}, {Step: 8, Crossover: 0.2}, {Step: -8, Crossover: 0.5}, {Exponent: -2, Step: 1.5, Crossover: 0.8}} {
		for _, temp := range []float64{250, 300, 625, 1000} {
			_, e := tr.at(Wide, temp)
			h := 1e-4 * temp
			a, _ := tr.at(Wide, temp-h)
			b, _ := tr.at(Wide, temp+h)
			want := -(b - a) / (inverse(temp+h) - inverse(temp-h))
			if !(math.Abs(e-want) <= 1e-6*math.Abs(want)) {
				t.Errorf("%+v at %g K: E_loc = %g, by differences %g", tr, temp, e, want)
			}
		}
	}
}

// The report names a missed target, tells chance from failure, and its lines have
// as many cells as its head.
func TestReport(t *testing.T) {
	for _, c := range []struct {
		value float64
		want  string
	}{{.05, passed}, {.057, unclear}, {.08, missed}, {.02, missed}} {
		r := &Row{Target: exact, Figures: []Figure{rate(int(c.value*5000), 5000)}, jobs: []*job{{counts: &Counts{Sets: 5000}}}}
		if word, detail := r.outcome(); word != c.want {
			t.Errorf("%g: %s (%s), want %s", c.value, word, detail, c.want)
		}
	}
	none := &Row{Target: exact, Figures: []Figure{rate(0, 0)}, jobs: []*job{{counts: &Counts{Sets: 5000}}}}
	if word, _ := none.outcome(); word != missed {
		t.Errorf("nothing tested: %s, want %s", word, missed)
	}

	s := &Study{byName: map[string]*job{}}
	s.criteria()
	s.repeats()
	if err := s.Run(context.Background(), Settings{Sets: 20, Seed: 1}, nil); err != nil {
		t.Fatal(err)
	}
	var out bytes.Buffer
	if _, err := s.Write(&out); err != nil {
		t.Fatal(err)
	}
	for line := range strings.Lines(out.String()) {
		if strings.HasPrefix(line, "|") && strings.Count(line, "|") != len(Temperatures)+3 {
			t.Errorf("a line of the table has the wrong number of cells: %s", line)
		}
	}
}
