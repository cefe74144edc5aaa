package calibration

import "testing"

// With an offset for each laboratory the exponent test is exact, and so are its
// intervals; taken as one, overlapping laboratories of 10 % bend the plot far more
// often. Where laboratories share no temperature their offsets hide real curvature.
func TestLaboratories(t *testing.T) {
	for _, c := range []struct {
		name string
		cell Cell
		sets int
		want map[Event][2]float64
	}{
		{"overlapping", Cell{Range: Narrow, N: 4, Laboratories: Overlap, Offsets: 1}, 1000,
			map[Event][2]float64{Curved: {.05, .05}, CoverN: {.95, .95}, CoverE: {.95, .95}, SecondBarrier: {.05, .05}}},
		{"apart", Cell{Range: Wide, N: 4, Laboratories: Apart, Offsets: 1, Lean: true}, 1500,
			map[Event][2]float64{Curved: {.05, .05}, CoverN: {.95, .95}, CoverE: {.95, .95}, CoverLocMax: {.95, .95}}},
		{"as one", Cell{Range: Wide, N: 8, Laboratories: Overlap | PooledLabs, Offsets: 1, Lean: true}, 1000,
			map[Event][2]float64{Curved: {.08, 1}}},
		{"curved, as one", Cell{Range: Narrow, N: 4, Laboratories: Apart | PooledLabs, Truth: Truth{Exponent: 16}, Lean: true}, 500,
			map[Event][2]float64{Curved: {.6, 1}}},
		{"curved, with offsets", Cell{Range: Narrow, N: 4, Laboratories: Apart, Truth: Truth{Exponent: 16}, Lean: true}, 500,
			map[Event][2]float64{Curved: {.1, .5}, CoverN: {.95, .95}}},
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
