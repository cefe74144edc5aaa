package calibration

import (
	"bytes"
	"context"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"onebarrier/diagnostics"
)

// The levels are those that the findings state. Bonferroni's bound is nearly reached by
// the largest of few residuals. The power of the last rows is that of the full study:
// about 0.45, 0.90 and 0.55.
func TestFindings(t *testing.T) {
	const n8 = "relative N=8"
	inK := Cell{Range: Narrow, N: 8, Absolute: true, Model: "relative", Lean: true}
	for _, c := range []struct {
		name string
		cell Cell
		sets int
		want map[Event][2]float64
	}{
		{n8, found(lean(Cell{Range: Narrow, N: 8}), Found{Runs: Shuffled}), 1500, map[Event][2]float64{
			FoundOutlier: {.03, .05}, FoundSpread: {.01, .01}, FoundNotNormal: {.005, .01}, FoundDrift: {.02, .05}, FoundAbsolute: {0, .03},
			FoundMaximum: {0, .01}, FoundSecondBarrier: {.05, .05}, FoundBorderline: {.05, .09}}},
		{"relative N=5", found(lean(Cell{Range: Wide, N: 5}), Found{Runs: FromCold}), 1500, map[Event][2]float64{
			FoundOutlier: {.03, .05}, FoundSpread: {.01, .01}, FoundNotNormal: {.005, .01}, FoundDrift: {0, .01}, FoundOrder: {1, 1}}},
		{"stated N=6", found(stated(Narrow).at(6), Found{}), 500, map[Event][2]float64{
			FoundContradicted: {.02, .05}, FoundScatterSmall: {.01, .01}, FoundChi2Low: {.08, .2}, FoundInadequate: {0, .01}, FoundOutlier: {0, .05}}},
		{"repeats N=5", found(Cell{Range: Narrow, N: 5, Repeats: Triplets, Lean: true}, Found{}), 1000, map[Event][2]float64{FoundInadequate: {0, .01}, FoundRepeatsShare: {.005, .01}}},
		{"laboratories N=4", found(Cell{Range: Narrow, N: 4, Laboratories: Overlap, Lean: true}, Found{}), 500, map[Event][2]float64{
			FoundOffset: {0, .05}, FoundOutlier: {.03, .05}}},
		{"u(T) N=5", found(Cell{Range: Wide, N: 5, Lean: true}, Found{UT: 0.2}), 1000, map[Event][2]float64{FoundBelowThermometer: {0, .01}}},
		{"a point off N=12", found(Cell{Range: Narrow, N: 12, Lean: true}, Found{Off: 4}), 200, map[Event][2]float64{FoundOutlier: {.3, .6}}},
		{"a drift N=12", found(Cell{Range: Narrow, N: 12, Lean: true}, Found{Runs: Shuffled, Drift: 4}), 200, map[Event][2]float64{FoundDrift: {.75, 1}}},
		{"errors in k N=8", found(inK, Found{Cold: 0.1}), 200, map[Event][2]float64{FoundAbsolute: {.4, .7}}},
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

// at is the cell at so many temperatures.
func (c Cell) at(n int) Cell {
	c.N = n
	return c
}

// A code that nothing raises would be counted as never raised.
func TestFindingsHaveCodes(t *testing.T) {
	for _, f := range foundEvents {
		if _, err := diagnostics.Explain(f.code); err != nil {
			t.Errorf("%s: %v", f.code, err)
		}
		if f.event.String() != f.code {
			t.Errorf("%s is called %s", f.code, f.event)
		}
	}
}

// What goes wrong in the data is of the size that is asked for.
func TestFoundData(t *testing.T) {
	c := Cell{Range: Narrow, N: 5}
	straight := c.draw(c.stream(1, 0))
	for i, order := range Shuffled.of(5, rand.New(rand.NewPCG(1, 2))) {
		drift := Found{Drift: 4}.bend(c, 0, i, order) / relativeNoise
		if want := order - 3; math.Abs(drift-want) > 1e-12 { // -2 to 2 over five runs
			t.Errorf("run %g drifts by %g, want %g", order, drift, want)
		}
	}
	if a, b := (Found{Off: 4}).bend(c, 0, 2, 0), (Found{Off: 4}).bend(c, 0, 1, 0); a != 4*relativeNoise || b != 0 {
		t.Errorf("the middle point is off by %g, another by %g", a, b)
	}
	for _, v := range []struct{ spread, cold, hot float64 }{{3, 3, 1}, {1.0 / 3, 1, 3}, {0, 1, 1}} {
		cold, hot := Found{Spread: v.spread}.spread(Narrow, Narrow.Low), Found{Spread: v.spread}.spread(Narrow, Narrow.High)
		if math.Abs(cold-v.cold)+math.Abs(hot-v.hot) > 1e-12 {
			t.Errorf("%g: %g at the cold end, %g at the hot one", v.spread, cold, hot)
		}
	}
	lnK, _ := Truth{}.at(Narrow, Narrow.Low)
	if got := (Cell{Range: Narrow, Found: Found{Cold: 0.1}}).noiseInK(middleLnK); math.Abs(got/math.Exp(lnK)-0.1) > 1e-12 {
		t.Errorf("errors in k are %g of k at the cold end", got/math.Exp(lnK))
	}
	// Conditions without findings keep their streams.
	if strings.Contains(c.name(), "Found") || len(straight.Points) != 5 {
		t.Errorf("name %s", c.name())
	}
}

// A part of the study runs by itself, with what its figures need of other parts.
func TestOnly(t *testing.T) {
	for only, want := range map[string]int{"second path": 1, "findings": 2, "": len(New().Sections), "nowhere": 0} {
		s := New()
		s.Only(only)
		if len(s.Sections) != want {
			t.Errorf("%q: %d sections, want %d", only, len(s.Sections), want)
		}
	}
	s := New()
	s.Only("second path")
	for _, r := range s.Sections[0].Rows { // of the dearest rows one will do
		if len(r.needs) > 0 {
			s.Sections[0].Rows = []*Row{r}
			break
		}
	}
	s.Only("")
	if err := s.Run(context.Background(), Settings{Sets: 20, Seed: 1}, nil); err != nil {
		t.Fatal(err)
	}
	var out bytes.Buffer
	if _, err := s.Write(&out); err != nil || !strings.Contains(out.String(), "calibrated likelihood ratio") {
		t.Errorf("%v, %s", err, out.String())
	}
}
