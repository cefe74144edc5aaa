package diagnostics

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"onebarrier/models"
	"onebarrier/models/fit"
)

// maximumLevel is the level at which k must rise before its largest value and fall
// after it, each after Bonferroni for the place of the maximum.
const maximumLevel = 0.01

// fallNeeded is the least number of temperatures above the maximum: a single low one
// may be an outlier.
const fallNeeded = 2

// rateMaximum looks for an optimum: k that rises to some temperature and falls again
// above it. The largest mean is compared with the mean over all hotter and with that
// over all colder temperatures, by Student's t with σ̂ of power-prefactor, or, since
// that is too large where the curve cannot follow a steep fall, with σ̂ of the same
// curve through the temperatures up to the maximum. The more significant of the two
// counts. Of many points the largest has the largest error too, and may lie well above a
// hotter one: the fall must be that of a curve as well. A false alarm needs a rise and a fall that are both significant, and is rarer
// than the level all the same (TestRateMaximumFalseAlarms).
func (a *assessor) rateMaximum() {
	s := a.data.sample
	t, y, w := byTemperature(s)
	top := 0
	for i := range y {
		if y[i] > y[top] {
			top = i
		}
	}
	if top == 0 || top > len(y)-1-fallNeeded || a.power.Nu < 1 || !a.power.Usable() || !a.fallsAt(t[len(t)-1]) {
		return
	}
	fits := []*fit.Result{a.power.Measured()}
	if !s.Model.KnownSigma() {
		if f := upTo(s, t[top]); f != nil && f.Usable() && f.Nu > 0 && !noScatter(s, f.RSS) {
			fits = append(fits, f)
		}
	}
	after, before := apart(y[top], w[top], y[top+1:], w[top+1:]), apart(y[top], w[top], y[:top], w[:top])
	p := 1.0
	for _, f := range fits {
		tail := func(z float64) float64 { // one-sided, for the most significant of so many places
			q := pNormal(z / f.Sigma)
			if !s.Model.KnownSigma() {
				q = pStudent(z/f.Sigma, float64(f.Nu))
			}
			return math.Min(1, q/2*float64(len(y)-2))
		}
		if after > 0 && before > 0 {
			p = math.Min(p, math.Max(tail(after), tail(before)))
		}
	}
	if !(p < maximumLevel) {
		return
	}
	last, where := len(y)-1, kelvinText(t[top])
	ratio := math.Exp(y[last] - y[top])
	if s.Model.InK() {
		ratio = y[last] / y[top]
	}
	f := newFinding("rate-maximum", fmt.Sprintf("k rises up to %s K and falls above it: at %s K it is %s times what it is at %s K (p = %s)",
		where, kelvinText(t[last]), significant(ratio, 2, ""), where, pText(p)), nil,
		map[string]Real{"t_k": Real(t[top]), "ratio": Real(ratio), "p_value": Real(p)})
	f.Cure = a.cureOfMaximum(t, y, top)
	a.findings = append(a.findings, f)
	// Of n one point may decide; the fall is tested on all temperatures above the maximum.
	if i := slices.IndexFunc(a.findings, func(f Finding) bool { return f.Code == "deciding-point" }); i >= 0 {
		a.findings[i].Cure = fmt.Sprintf("measure there again; that k falls above %s K is a test of its own, on the %d temperatures above it, and stands by itself: see rate-maximum", where, len(y)-1-top)
	}
}

// cureOfMaximum says how to go on, with flags that can be typed as they stand: first the
// curve that has a maximum, then the part that rises. Near the largest k, at t[top],
// E_loc is on its way to 0. Where k is below half of it, little is lost: of a reversible
// inactivation with ΔH_d = 3 E less than 2 % is inactive there, with 6 E 0.1 %, so that
// E_loc is E to within a few per cent.
func (a *assessor) cureOfMaximum(t, y []float64, top int) string {
	var cures []string
	form, curve := "reversible-inactivation", models.Series{}.Info().Name
	r := a.fitOf(curve)
	switch {
	case a.verdict.RecommendedCurve == curve:
		cures = append(cures, "keep to the recommended curve: series, read as "+form+", has such a maximum")
	case r == nil:
		cures = append(cures, "fit a curve that has a maximum: --models +"+form)
	case r.Usable() && r.Cov != nil:
		cures = append(cures, "read the series curve in its form "+form+", which has a maximum (--json)")
	}
	half := y[top] - math.Ln2
	if a.data.sample.Model.InK() {
		half = y[top] / 2
	}
	cut := 0 // temperatures that are kept
	for cut < top && y[cut] <= half {
		cut++
	}
	if cut >= minTemperatures {
		cures = append(cures, fmt.Sprintf("assess the part that rises freely, up to half of the largest k: --t-max %sK", numberBetween(t[cut-1], t[cut])))
	}
	if len(cures) == 0 {
		return "measure more temperatures on both sides of the maximum"
	}
	return strings.Join(cures, ", or ")
}

// numberBetween is a number between two others with as few decimals as can be: rounded to two
// decimals a temperature may lie on the wrong side of itself.
func numberBetween(low, high float64) string {
	for d := 0; ; d++ {
		s := strconv.FormatFloat((low+high)/2, 'f', d, 64)
		if x, err := strconv.ParseFloat(s, 64); err != nil || low < x && x < high || d > 15 {
			return s
		}
	}
}

// fallsAt reports whether k falls with T at t, in K, by the curve power-prefactor or
// the recommended one: E_loc < 0.
func (a *assessor) fallsAt(t float64) bool {
	for _, f := range []*fit.Result{a.power, a.fitOf(a.verdict.RecommendedCurve)} {
		if f != nil && LocalEnergy(f, t, a.opt.Confidence).Value < 0 {
			return true
		}
	}
	return false
}

// byTemperature joins entries at one temperature: ln k, or k where errors are in k, and
// their weights.
func byTemperature(s *fit.Sample) (t, y, w []float64) {
	values := s.Y
	if s.Model.InK() {
		values = s.K
	}
	for i := range s.T {
		wi, last := 1/s.V[i], len(t)-1
		if last >= 0 && models.SameTemperature(t[last], s.T[i]) {
			y[last] = (w[last]*y[last] + wi*values[i]) / (w[last] + wi)
			w[last] += wi
			continue
		}
		t, y, w = append(t, s.T[i]), append(y, values[i]), append(w, wi)
	}
	return t, y, w
}

// apart is y0 less the weighted mean of y, in standard deviations at σ = 1.
func apart(y0, w0 float64, y, w []float64) float64 {
	var sw, swy float64
	for i := range y {
		sw, swy = sw+w[i], swy+w[i]*y[i]
	}
	return (y0 - swy/sw) / math.Sqrt(1/w0+1/sw)
}

// upTo fits power-prefactor to the entries up to a temperature; nil where they are too
// few.
func upTo(s *fit.Sample, t float64) *fit.Result {
	n := 0
	for n < s.Len() && (s.T[n] <= t || models.SameTemperature(s.T[n], t)) {
		n++
	}
	if models.CountTemperatures(s.T[:n]) < minTemperatures+1 {
		return nil
	}
	part, err := fit.NewSample(s.Model, s.T[:n], s.K[:n], s.V[:n])
	if err != nil {
		return nil
	}
	return fit.Fit(part, models.PowerPrefactor{})
}
