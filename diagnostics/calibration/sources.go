package calibration

import (
	"fmt"
	"math"
	"math/rand/v2"

	"onebarrier/models/dataset"
)

// Laboratories says which part of the range each of three laboratories measures, at N
// temperatures each.
type Laboratories int

// The plans of laboratories.
const (
	One        Laboratories = iota // there is one
	Overlap                        // each covers half of the range, shifted by a quarter
	Apart                          // each covers a third
	PooledLabs Laboratories = 4    // added: nobody says who measured what
)

// laboratoryFactor is the standard deviation of the offset of a laboratory in ln k.
const laboratoryFactor = 0.1

// part is the share of the range that laboratory j of three measures.
func (l Laboratories) part(j int) (low, high float64) {
	if l&^PooledLabs == Overlap {
		return float64(j) / 4, float64(j)/4 + 0.5
	}
	return (float64(j) + 0.05) / 3, (float64(j) + 0.95) / 3
}

// measured draws what three laboratories measure.
func (l Laboratories) measured(c Cell, rng *rand.Rand) *dataset.Set {
	set := &dataset.Set{
		Name:     "simulated",
		Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true},
	}
	detection := math.Exp(c.detection())
	for j := range 3 {
		offset := c.Offsets * laboratoryFactor * rng.NormFloat64()
		low, high := l.part(j)
		for i := range c.N {
			at := low + (high-low)*float64(i)/float64(c.N-1)
			t := c.Range.Low + (c.Range.High-c.Range.Low)*at
			lnK, _ := c.Truth.at(c.Range, t)
			p := dataset.Point{Row: len(set.Points) + 2, T: t, Order: math.NaN(), Used: true}
			p.K = math.Exp(lnK + offset + relativeNoise*c.Shape.deviate(rng))
			if l&PooledLabs == 0 {
				p.Source = fmt.Sprint("laboratory ", j+1)
			}
			c.Limits.apply(&p, detection)
			set.Points = append(set.Points, p)
		}
	}
	return set
}

func (s *Study) sources() {
	s.section("Three laboratories",
		"Error model relative; three laboratories measure N temperatures each, half of the range with overlap or a third each; offsets between them, where there are any, have a standard deviation of 10 %. Share of curved verdicts in per cent, with an offset for each fitted and with all taken as one; and, of sets that can be tested, with k not detected in the coldest fifth of the range and these points as limits.")
	for _, r := range ranges {
		for _, v := range []struct {
			name string
			labs Laboratories
		}{{"overlapping", Overlap}, {"apart", Apart}} {
			c := Cell{Range: r, Lean: true, Laboratories: v.labs, Offsets: 1}
			pooled := c
			pooled.Laboratories |= PooledLabs
			s.row(fmt.Sprintf("one barrier, offsets, %s, %s: offsets fitted", v.name, r), c, someForPower, Curved, exact)
			s.row(fmt.Sprintf("one barrier, offsets, %s, %s: as one", v.name, r), pooled, someForPower, Curved, nil)
			c.Limits = AsLimits
			s.row(fmt.Sprintf("one barrier, offsets, limits in the coldest fifth, %s, %s: offsets fitted", v.name, r), c, someForPower, Curved, nil)
		}
		c := Cell{Range: r, Lean: true, Laboratories: Apart, Truth: Truth{Exponent: sourcesExponent[r]}}
		pooled := c
		pooled.Laboratories |= PooledLabs
		s.row(fmt.Sprintf("n = %g, no offsets, apart, %s: offsets fitted", c.Truth.Exponent, r), c, someForPower, Curved, nil)
		s.row(fmt.Sprintf("n = %g, no offsets, apart, %s: as one", c.Truth.Exponent, r), pooled, someForPower, Curved, nil)
	}
}

// sourcesExponent is an exponent of T that five temperatures in each of three
// laboratories mostly show when taken as one.
var sourcesExponent = map[Range]float64{Narrow: 16, Wide: 0.5}
