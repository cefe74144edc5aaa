package bootstrap

import (
	"math"
	"slices"
	"sync"

	"gonum.org/v1/gonum/stat/distuv"
)

// Method is a way of making an interval from resampled values.
type Method string

// The methods.
const (
	// BootstrapT inverts the distribution of (θ* - θ̂)/se*; its coverage holds
	// from about five points.
	BootstrapT Method = "bootstrap-t"
	// Percentile takes quantiles of θ*; too short in small samples.
	Percentile Method = "percentile"
	// BCa corrects the percentiles for bias and acceleration.
	//
	// B. Efron, J. Am. Stat. Assoc. 82 (1987) 171.
	BCa Method = "bca"
)

// Methods lists them in the order of the documentation.
var Methods = []Method{BootstrapT, Percentile, BCa}

// smallSample is the number of entries below which percentile and BCa intervals
// are marked as too short.
const smallSample = 20

// values holds resampled values and finds their order statistics.
type values struct {
	x []float64
}

// valid drops NaN in place and keeps the order of the rest.
func valid(x []float64) []float64 { return slices.DeleteFunc(x, math.IsNaN) }

// quantile is the order statistic at (B+1)p, interpolated linearly between
// neighbours (R's type 6) and held within the smallest and the largest value.
// NaN if there is none.
func (v *values) quantile(p float64) float64 {
	b := len(v.x)
	if b == 0 || math.IsNaN(p) {
		return math.NaN()
	}
	h := float64(b+1) * p
	// (B+1)p is meant to be whole for the usual B and p; 10000*0.975 must not
	// miss by its rounding.
	if near := math.Round(h); math.Abs(h-near) < 1e-9*float64(b) {
		h = near
	}
	k := math.Floor(h)
	lo := v.at(int(k))
	if k < 1 || k >= float64(b) || h == k {
		return lo
	}
	return lo + (h-k)*(v.at(int(k)+1)-lo)
}

// at is the k-th smallest value, k from 1, held within 1..B.
func (v *values) at(k int) float64 {
	k = min(max(k, 1), len(v.x)) - 1
	selectNth(v.x, k)
	return v.x[k]
}

// selectNth moves the value that sorting would put at k there, smaller ones before
// and larger ones after it. Linear time on average (C. A. R. Hoare, Commun. ACM 4
// (1961) 321, FIND), the pivot being the median of three.
func selectNth(x []float64, k int) {
	lo, hi := 0, len(x)-1
	for lo < hi {
		mid := lo + (hi-lo)/2
		if x[mid] < x[lo] {
			x[mid], x[lo] = x[lo], x[mid]
		}
		if x[hi] < x[lo] {
			x[hi], x[lo] = x[lo], x[hi]
		}
		if x[hi] < x[mid] {
			x[hi], x[mid] = x[mid], x[hi]
		}
		pivot := x[mid]
		i, j := lo, hi
		for i <= j {
			for x[i] < pivot {
				i++
			}
			for pivot < x[j] {
				j--
			}
			if i <= j {
				x[i], x[j] = x[j], x[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			hi = j
		case k >= i:
			lo = i
		default:
			return
		}
	}
}

// sortShared sorts values without NaN by at most so many goroutines.
func sortShared(x []float64, workers int) {
	if workers < 2 || len(x) < 1000 { // a shorter slice is sorted before a goroutine starts
		slices.Sort(x)
		return
	}
	most := workers / 2
	mid := len(x) * most / workers
	selectNth(x, mid)
	var wg sync.WaitGroup
	wg.Go(func() { sortShared(x[:mid], most) })
	sortShared(x[mid:], workers-most)
	wg.Wait()
}

// biasCorrection is z0 = Φ⁻¹(share of values below the estimate), values that
// equal it to within tol counted half.
func biasCorrection(x []float64, estimate, tol float64) float64 {
	var below, equal float64
	for _, v := range x {
		switch {
		case math.Abs(v-estimate) <= tol:
			equal++
		case v < estimate:
			below++
		}
	}
	return distuv.UnitNormal.Quantile((below + equal/2) / float64(len(x)))
}

// acceleration is a = Σ L³/(6 (Σ L²)^1.5) from influence values L (Efron 1987,
// eq. 6.6).
func acceleration(influence []float64) float64 {
	var s2, s3 float64
	for _, l := range influence {
		s2 += l * l
		s3 += l * l * l
	}
	if s2 == 0 {
		return 0
	}
	return s3 / (6 * math.Pow(s2, 1.5))
}

// bcaLevels gives the percentiles that a BCa interval reads (Efron 1987, eq. 2.3).
// NaN where the correction has no solution.
func bcaLevels(z0, a, confidence float64) (lower, upper float64) {
	level := func(p float64) float64 {
		z := z0 + distuv.UnitNormal.Quantile(p)
		d := 1 - a*z
		if !(d > 0) || math.IsInf(z0, 0) {
			return math.NaN()
		}
		return distuv.UnitNormal.CDF(z0 + z/d)
	}
	return level((1 - confidence) / 2), level((1 + confidence) / 2)
}
