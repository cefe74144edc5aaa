package figure

import (
	"math"
	"slices"
	"strconv"
	"strings"

	"gonum.org/v1/plot"
)

// niceStep is the smallest of 1, 2, 5 times a power of ten that is not below raw,
// with the number of minor steps in it and the decimals that it needs.
func niceStep(raw float64) (step float64, minor, decimals int) {
	e := math.Floor(math.Log10(raw))
	for {
		for _, m := range []float64{1, 2, 5} {
			if step = m * math.Pow(10, e); step >= raw*(1-1e-9) {
				minor = 5
				if m == 2 {
					minor = 4
				}
				return step, minor, int(math.Max(0, -e))
			}
		}
		e++
	}
}

// linear marks an axis at multiples of a nice step, about most of them.
type linear struct{ most int }

var _ plot.Ticker = linear{}

// Ticks implements plot.Ticker.
func (l linear) Ticks(low, high float64) []plot.Tick {
	step, minor, decimals := niceStep((high - low) / float64(l.most))
	var ticks []plot.Tick
	fine := step / float64(minor)
	for i := math.Ceil(low/fine - 1e-9); i <= high/fine+1e-9; i++ {
		t := plot.Tick{Value: i * fine}
		if math.Mod(i, float64(minor)) == 0 {
			t.Label = number(t.Value, decimals)
		}
		ticks = append(ticks, t)
	}
	return ticks
}

// number writes a number with a true minus sign, and no sign on zero.
func number(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-")
	}
	return strings.Replace(s, "-", "−", 1)
}

// celsiusZero is 0 °C in K.
const celsiusZero = 273.15

// celsius chooses round temperatures in °C between low and high (K) for an axis on
// which at gives the place of a temperature in K, in any unit of length. room is the
// least distance between the middles of two labels of so many characters. Steps
// are even if at least four labels then fit; on a range so wide that an even step
// crowds its hot end, finer steps fill the room that is left.
func celsius(low, high float64, at func(kelvin float64) float64, room func(label string) float64) []plot.Tick {
	decimals := 0
	multiples := func(step float64) (ts []float64) {
		for i := math.Ceil((low-celsiusZero)/step - 1e-9); i*step <= high-celsiusZero+1e-9*step; i++ {
			ts = append(ts, i*step)
		}
		return ts
	}
	fits := func(a, b float64, decimals int) bool {
		gap := math.Abs(at(a+celsiusZero) - at(b+celsiusZero))
		return gap >= (room(number(a, decimals))+room(number(b, decimals)))/2
	}
	allFit := func(ts []float64, decimals int) bool {
		for i := 1; i < len(ts); i++ {
			if !fits(ts[i-1], ts[i], decimals) {
				return false
			}
		}
		return true
	}
	var best []float64
	// From the finest step that could fit to the coarsest that leaves a label.
	for raw := (high - low) / 12; raw <= high-low; {
		step, _, dec := niceStep(raw)
		if ts := multiples(step); allFit(ts, dec) {
			best, decimals = ts, dec
			break
		}
		raw = step * 1.01
	}
	if len(best) < 4 {
		if ts, dec := filled(low, high, multiples, fits); len(ts) > len(best)+1 {
			best, decimals = ts, dec
		}
	}
	ticks := make([]plot.Tick, len(best))
	for i, t := range best {
		ticks[i] = plot.Tick{Value: t + celsiusZero, Label: number(t, decimals)}
	}
	return ticks
}

// filled takes round temperatures one by one, the roundest first, and keeps each
// that has room between its neighbours.
func filled(low, high float64, multiples func(float64) []float64, fits func(a, b float64, decimals int) bool) ([]float64, int) {
	decimals := 0
	var ts []float64
	for e := math.Ceil(math.Log10(high)); math.Pow(10, e) > (high-low)/1000; e-- {
		for _, m := range []float64{1, 0.5, 0.2} {
			step := m * math.Pow(10, e)
			dec := int(math.Max(0, -math.Floor(math.Log10(step)+1e-9)))
			for _, t := range multiples(step) {
				i, _ := slices.BinarySearch(ts, t-1e-9*step)
				if i < len(ts) && ts[i] <= t+1e-9*step {
					continue // taken as a rounder number
				}
				// A number is not much less round than the gap it stands in is wide:
				// 300 between 200 and 500, not 315.
				gap := 0.0
				switch {
				case i > 0 && i < len(ts):
					gap = ts[i] - ts[i-1]
				case i > 0:
					gap = t - ts[i-1]
				case len(ts) > 0:
					gap = ts[0] - t
				}
				if step < 0.15*gap {
					continue
				}
				if (i == 0 || fits(ts[i-1], t, dec)) && (i == len(ts) || fits(t, ts[i], dec)) {
					ts = slices.Insert(ts, i, t)
					decimals = max(decimals, dec)
				}
			}
		}
	}
	return ts, decimals
}
