package diagnostics

import (
	"fmt"
	"math"
	"slices"

	"onebarrier/models"
	"onebarrier/models/fit"
)

const (
	// endsNeeded is the least number of temperatures of which a third can be
	// predicted from the rest.
	endsNeeded = 6
	// firstWeight is the family weight from which the first of the ranking counts as
	// preferred, and worseThan how many times its error at the ends must exceed that
	// of the straight line to be reported.
	firstWeight = 0.5
	worseThan   = 2
	// absurd is how many times that error a miss may be before its size says nothing.
	absurd = 1000
	// refitted is the largest number of entries for which curves are fitted anew without
	// each temperature: those that are not linear, and with limits all.
	refitted = 30
)

// Prediction says how well each candidate predicts what it was not fitted to.
type Prediction struct {
	Unit            string            `json:"unit"` // of the errors: ln k, or the unit of k where errors are in k
	EndTemperatures int               `json:"end_temperatures"`
	Curves          []CurvePrediction `json:"curves"` // in order of rank
}

// CurvePrediction holds root mean squares of prediction errors, weighted by 1/V.
// Unknown is what the data without the left-out temperatures do not determine.
type CurvePrediction struct {
	Curve string `json:"curve"`
	// LeftOut: each temperature from all others.
	LeftOut Real `json:"left_out"`
	// Why says why LeftOut is unknown; "" where it is known.
	Why string `json:"why_not"`
	// Linearised says that LeftOut comes from the fit linearised about its estimates.
	Linearised bool `json:"linearised"`
	// HotEnd and ColdEnd: the hottest and the coldest third of the temperatures from
	// the rest; Ends: both together.
	HotEnd  Real `json:"hot_end"`
	ColdEnd Real `json:"cold_end"`
	Ends    Real `json:"ends"`
}

// predict compares the candidates by prediction. Curves that are not linear in their
// parameters are fitted anew only where the ranking takes them seriously, in the 95 %
// set: such a fit is dear. Limits stay in every fit; what is predicted is what was
// measured. Offsets of sources are held at what all data say where a curve is fitted anew.
func (a *assessor) predict() {
	s := a.data.sample
	temperatures := temperatureGroups(s)
	if a.untestable != "" || s.Len() > FullyResampled {
		return
	}
	out := &Prediction{Unit: "ln k", Curves: []CurvePrediction{}}
	if s.Model.InK() {
		out.Unit = a.set.Quantity.Unit
	}
	var hot, cold *endOut
	if n := len(temperatures); n >= endsNeeded {
		out.EndTemperatures = n / 3
		cold = newEndOut(s, temperatures, 0, n/3)
		hot = newEndOut(s, temperatures, n-n/3, n)
	}
	for _, row := range a.ranking {
		r := a.fitOf(row.Curve)
		if !r.Usable() {
			continue
		}
		_, linear := r.Curve.(models.Basis)
		nan := Real(math.NaN())
		p := CurvePrediction{Curve: row.Curve, LeftOut: nan, HotEnd: nan, ColdEnd: nan, Ends: nan}
		limited := len(s.Limits) > 0
		again := s.Len() <= refitted && (row.InSet && !linear && !s.Model.InK() || limited && (linear || row.InSet))
		switch {
		case again:
			p.LeftOut = Real(leftOutAnew(s, r.Curve, temperatures))
		case limited && s.Len() > refitted:
			p.Why = fmt.Sprintf("with limits it takes a fit for each temperature, which is not made for more than %d", refitted)
		case limited:
			p.Why = "with limits it takes a fit for each temperature, which is not made for a curve outside the 95 % set"
		default:
			p.LeftOut, p.Linearised = Real(leftOut(s, r, temperatures)), !linear || s.Model.InK()
		}
		if p.Why == "" && !p.LeftOut.Known() {
			p.Why = "without some temperature the rest do not determine the curve"
		}
		if hot != nil && (linear || row.InSet) {
			h, c := hot.errors(r.Curve), cold.errors(r.Curve)
			p.HotEnd, p.ColdEnd, p.Ends = Real(h.rms()), Real(c.rms()), Real(h.and(c).rms())
		}
		out.Curves = append(out.Curves, p)
	}
	a.prediction = out
	a.firstExtrapolates()
}

// firstExtrapolates reports a first of the ranking, preferred by its weight and other
// than the straight line, that predicts the ends worst of all candidates for which
// that is known, and with more than twice the error of the straight line.
func (a *assessor) firstExtrapolates() {
	if len(a.ranking) == 0 {
		return
	}
	first := a.ranking[0]
	if first.Status != StatusRanked || !(first.FamWeight >= firstWeight) {
		return
	}
	ends := map[string]Real{}
	var worst Real
	for _, c := range a.prediction.Curves {
		ends[c.Curve] = c.Ends
		if c.Ends.Known() {
			worst = max(worst, c.Ends)
		}
	}
	line := models.Straight().Info().Name
	own, known := ends[first.Curve]
	straight, compared := ends[line]
	if first.Curve == line || !known || !compared || !(own >= worst) || !(own > worseThan*straight) {
		return
	}
	misses := fmt.Sprintf("by %s on average, the straight line by %s (%s)",
		significant(float64(own), 2, ""), significant(float64(straight), 2, ""), a.prediction.Unit)
	if own > absurd*straight {
		misses = fmt.Sprintf("more than %d times as far as the straight line does", absurd)
	}
	a.find("first-extrapolates-worst",
		fmt.Sprintf("%s ranks first, but is the worst of all candidates at extrapolating: fitted without the hottest or without the coldest third of the temperatures, it misses them %s",
			first.Curve, misses),
		nil, map[string]Real{"ends": own, "ends_straight": straight})
}

// temperatureGroups lists the entries of s at each temperature, in order of T.
func temperatureGroups(s *fit.Sample) [][]int {
	var groups [][]int
	for _, i := range orderOfT(s) {
		if n := len(groups); n > 0 && models.SameTemperature(s.T[groups[n-1][0]], s.T[i]) {
			groups[n-1] = append(groups[n-1], i)
		} else {
			groups = append(groups, []int{i})
		}
	}
	return groups
}

// squares sums squared errors over their variances, and the weights.
type squares struct{ sum, weight float64 }

func (q *squares) add(e, v float64) {
	q.sum += e * e / v
	q.weight += 1 / v
}

func (q squares) and(o squares) squares { return squares{q.sum + o.sum, q.weight + o.weight} }

// rms is NaN where nothing was predicted.
func (q squares) rms() float64 { return math.Sqrt(q.sum / q.weight) }

// unpredicted makes every mean that it enters unknown.
var unpredicted = squares{math.NaN(), math.NaN()}

// leftOut is the error of predicting each temperature from the others, in closed form:
// e/(1-h) for a temperature of one entry, (1 - H)⁻¹e with the block of the hat matrix
// for one of several (Cook & Weisberg, Residuals and Influence in Regression (1982),
// section 2.2; the sum of squares is PRESS, Allen, Technometrics 16 (1974) 125). NaN
// where a temperature determines its own fitted value.
func leftOut(s *fit.Sample, r *fit.Result, temperatures [][]int) float64 {
	if len(r.Leverage) != s.Len() {
		return math.NaN()
	}
	var total squares
	var basis [][]float64
	for _, group := range temperatures {
		if len(group) == 1 {
			i := group[0]
			if !(1-r.Leverage[i] > 1e-9) {
				return math.NaN()
			}
			total.add(r.Residuals[i]/(1-r.Leverage[i]), s.V[i])
			continue
		}
		if basis == nil {
			basis = tangent(s, r)
		}
		m := len(group)
		left, e := make([]float64, m*m), make([]float64, m)
		for j, i := range group {
			e[j] = r.Residuals[i] / math.Sqrt(s.V[i])
			for k, l := range group {
				if j == k {
					left[j*m+k] = 1
				}
				for _, q := range basis {
					left[j*m+k] -= q[i] * q[l]
				}
			}
		}
		if !solveDefinite(left, e) {
			return math.NaN()
		}
		for j, i := range group {
			total.add(e[j]*math.Sqrt(s.V[i]), s.V[i])
		}
	}
	return total.rms()
}

// solveDefinite replaces b by A⁻¹b for a symmetric A, row-major, by Cholesky's method;
// false where A is not positive definite by a margin.
func solveDefinite(a, b []float64) bool {
	n := len(b)
	for j := range n {
		d := a[j*n+j]
		for k := range j {
			d -= a[j*n+k] * a[j*n+k]
		}
		if !(d > 1e-9) {
			return false
		}
		d = math.Sqrt(d)
		a[j*n+j] = d
		for i := j + 1; i < n; i++ {
			for k := range j {
				a[i*n+j] -= a[i*n+k] * a[j*n+k]
			}
			a[i*n+j] /= d
		}
		for k := range j {
			b[j] -= a[j*n+k] * b[k]
		}
		b[j] /= d
	}
	for j := n - 1; j >= 0; j-- {
		for k := j + 1; k < n; k++ {
			b[j] -= a[k*n+j] * b[k]
		}
		b[j] /= a[j*n+j]
	}
	return true
}

// leftOutAnew is leftOut by fits without each temperature.
func leftOutAnew(s *fit.Sample, c models.Curve, temperatures [][]int) float64 {
	var total squares
	for k := range temperatures {
		total = total.and(newEndOut(s, temperatures, k, k+1).errors(c))
	}
	return total.rms()
}

// endOut is a sample without some neighbouring temperatures.
type endOut struct {
	s    *fit.Sample
	rest *fit.Sample // nil where it cannot be formed
	out  []int
}

// newEndOut leaves out the temperatures from low up to, not including, high; limits stay.
func newEndOut(s *fit.Sample, temperatures [][]int, low, high int) *endOut {
	e := &endOut{s: s}
	var t, k, v []float64
	for g, group := range temperatures {
		for _, i := range group {
			if g >= low && g < high {
				e.out = append(e.out, i)
				continue
			}
			t, k, v = append(t, s.T[i]), append(k, s.K[i]), append(v, s.V[i])
		}
	}
	rest, err := fit.NewSample(s.Model, t, k, v)
	if err == nil && len(s.Limits) > 0 {
		limits := slices.Clone(s.Limits)
		for i := range limits {
			limits[i].Beside = nil // offsets are held
		}
		rest, err = rest.WithLimits(limits)
	}
	if err == nil {
		e.rest = rest
	}
	return e
}

// errors of the curve at what was left out, fitted to the rest. Where the rest exclude
// the curve it is the straight line there.
func (e *endOut) errors(c models.Curve) squares {
	if e.rest == nil {
		return unpredicted
	}
	r := fit.Fit(e.rest, c)
	if r.Status == fit.Excluded {
		r = fit.Fit(e.rest, models.Straight())
	}
	if !r.Usable() || r.Nu < 1 {
		return unpredicted
	}
	t, f := make([]float64, len(e.out)), make([]float64, len(e.out))
	for j, i := range e.out {
		t[j] = e.s.T[i]
	}
	r.Curve.LnK(r.TRef, t, r.P, f, nil)
	var q squares
	for j, i := range e.out {
		if e.s.Model.InK() {
			q.add(e.s.K[i]-math.Exp(f[j]), e.s.V[i])
		} else {
			q.add(e.s.Y[i]-f[j], e.s.V[i])
		}
	}
	return q
}
