package diagnostics

import (
	"fmt"
	"strings"

	"gonum.org/v1/gonum/floats"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"
)

// publishStyle is the style in which results are published.
func (a *assessor) publishStyle() string {
	if a.opt.PublishStyle != "" {
		return a.opt.PublishStyle
	}
	style := styleOf(a.set.Quantity)
	own := map[string]string{StyleKelvin: "K", StyleEvaluated: "K", StyleElectronvolt: "eV"}[style]
	if a.opt.KeepEnergyUnit && own != "" && a.opt.EnergyUnit != own {
		return StyleMolar // the others have their unit by definition
	}
	return style
}

// publishInto states every curve in its forms, k at the reference temperature, and
// what to publish: the recommended curve, or where there is none how E changes by
// power-prefactor.
func (a *assessor) publishInto(doc *Assessment) {
	tRef := doc.Settings.ReferenceTemperature
	fr := models.Frame{TForm: tRef}
	profiles, profilers := map[string]map[string]fit.Estimate{}, map[string]*profiler{}
	for i := range doc.Ranking {
		r := &doc.Ranking[i]
		f := doc.Fits[r.Curve]
		if !f.Usable() {
			continue
		}
		p := a.profiler(f)
		profilers[r.Curve], profiles[r.Curve] = p, a.profiles(f, fr, p)
		r.Forms = formEstimates(f, fr, a.opt.Confidence, a.set.Quantity, profiles[r.Curve])
		if p != nil {
			for j := range r.Forms {
				r.Forms[j].Note = strings.Join(p.notes, "; ")
			}
		}
	}
	low, high := a.data.sample.Range()
	in := toPublish{
		Power: a.power, Eyring: a.eyring(), Quantity: a.set.Quantity, State: a.verdict.State,
		TMin: low, TMax: high, TEff: a.tEff, TRef: tRef, Confidence: a.opt.Confidence,
		Style: doc.Settings.PublishStyle, EnergyUnit: a.opt.EnergyUnit,
		Curvature: doc.Curvature,
	}
	atRef := a.power
	if curve := a.verdict.RecommendedCurve; curve != "" {
		in.Fit, in.Profiles, in.Profile = doc.Fits[curve], profiles[curve], profilers[curve]
		in.Exact = roundingOf(in.Fit, a.data.sample, a.opt.Confidence).Exact
		atRef = in.Fit
	} else {
		pe, ofMeans := a.data.repeats()
		_, in.PowerAdequate = CheckAdequacy(a.data.sample, a.power, pe, ofMeans, &RunsNulls{few: a.opt.SequentialNull})
		if in.PowerAdequate != nil && !*in.PowerAdequate {
			atRef = nil
		}
	}
	in.Scatter = a.data.sourceScatter()
	doc.AtReference = atReference(atRef, tRef, a.opt.Confidence, low, high, in.Scatter)
	doc.Publish = publish(in)
	if !a.set.Quantity.Known && !a.set.Quantity.Diffusion {
		a.find("eyring-withheld", "ΔS‡ and ΔG‡ are not stated: the unit of "+symbolOf(a.set.Quantity)+" was not understood", nil, nil)
	}
	a.checkCrossover(doc.Ranking, low, high)
	if doc.AtReference.Extrapolated {
		a.find("extrapolated", kelvinText(tRef)+" K lies outside the measured range. "+Caution, nil, map[string]Real{"t_k": Real(tRef)})
	}
}

// checkCrossover warns of a recommended curve whose crossover was not measured.
func (a *assessor) checkCrossover(ranking []Ranked, low, high float64) {
	for _, r := range ranking {
		if r.Curve != a.verdict.RecommendedCurve || len(r.Forms) == 0 {
			continue
		}
		for _, p := range r.Forms[0].Parameters {
			if p.Symbol == crossover && (float64(p.Value) < low || float64(p.Value) > high) {
				a.find("crossover-outside", fmt.Sprintf("the crossover at %s K lies outside the measured range, %s to %s K", fixed(float64(p.Value), 0, 0), kelvinText(low), kelvinText(high)), nil, map[string]Real{"t_x_k": p.Value})
			}
		}
	}
}

// Caution is printed with every rate outside the measured range.
const Caution = "Extrapolated rates are no basis for reactor relief, thermal-hazard, shelf-life or dosing decisions; those follow the local codes and licensed practice."

func symbolOf(q dataset.Quantity) string {
	if q.Symbol == "" {
		return "k"
	}
	return q.Symbol
}

// eyring is the fit of linear-prefactor, made where it was not a candidate.
func (a *assessor) eyring() *fit.Result {
	c := models.LinearPrefactor()
	if f := a.fitOf(c.Info().Name); f != nil {
		return f
	}
	return fit.Fit(a.data.sample, c)
}

// profiler gives the profile interval of any quantity of a fit.
type profiler struct {
	interval func(fit.Function) fit.Estimate
	notes    []string // on its intervals
}

// profiler returns nil for curves whose intervals are those of Student's t, and for those
// of two barriers, which profiles serves.
func (a *assessor) profiler(f *fit.Result) *profiler {
	s := a.data.sample
	switch c := f.Curve.(type) {
	case models.Seeded:
		region := fit.NewRegion(s, f, a.opt.Confidence)
		p := &profiler{interval: region.Interval}
		shape := c.Forms()[0].Params[2].Symbol
		if region.HoldsLine() {
			p.notes = append(p.notes, fmt.Sprintf("the interval of %s reaches the straight line: these data do not tell %s from one barrier", shape, c.Info().Name))
		}
		if region.MeetsBound() {
			p.notes = append(p.notes, fmt.Sprintf("an end is open where %s meets the bound of %s before the interval ends", shape, c.Info().Name))
		}
		return p
	case models.Basis:
		if _, ok := f.Curve.(models.Profiled); !ok || !a.model.InK() {
			return nil // in ln k exact by Student's t
		}
		return &profiler{interval: func(h fit.Function) fit.Estimate {
			if f.P == nil {
				return fit.Unknown()
			}
			// Linear in the parameters but for a constant.
			grad := make([]float64, f.Params())
			constant := h(f.P, grad) - floats.Dot(grad, f.P)
			e := fit.Profile(s, f, grad, a.opt.Confidence)
			e.Value, e.Lower, e.Upper = e.Value+constant, e.Lower+constant, e.Upper+constant
			return e
		}}
	}
	return nil
}

// profiles are the profile intervals of the parameters of forms whose estimates are far
// from normal, by form symbol and in the form's units: all that p gives, and what a curve
// asks for, such as the barriers and prefactors of two paths; nil for other curves.
func (a *assessor) profiles(f *fit.Result, fr models.Frame, p *profiler) map[string]fit.Estimate {
	if f.Nu < 1 {
		return nil
	}
	out := map[string]fit.Estimate{}
	if p != nil {
		fr.TRef, fr.LnPerSecond = f.TRef, a.set.Quantity.LnPerSecond
		for _, form := range f.Curve.Forms() {
			for i, par := range form.Params {
				out[par.Symbol] = p.interval(formParameter(form, fr, i))
			}
		}
		return out
	}
	c, ok := f.Curve.(models.Profiled)
	if !ok {
		return nil
	}
	same := c.Profiled()
	if len(same) == 0 {
		return nil
	}
	// Each quantity once, by its symbol in the first form.
	first := f.Curve.Forms()[0]
	fr.TRef, fr.LnPerSecond = f.TRef, a.set.Quantity.LnPerSecond
	once := map[string]fit.Estimate{}
	for i, par := range first.Params {
		if same[par.Symbol] != par.Symbol {
			continue
		}
		unit := 1.
		if par.Unit == "kJ mol^-1" {
			unit = 1000
		}
		var e fit.Estimate
		if a.model.InK() || a.data.sample.Spent() > 0 {
			grad := make([]float64, f.Params())
			formParameter(first, fr, i)(f.P, grad)
			floats.Scale(unit, grad) // in J/mol, as the canonical parameters
			e = fit.Profile(a.data.sample, f, grad, a.opt.Confidence)
		} else {
			e = fit.ProfileShaped(a.data.sample, f, par.Symbol, a.opt.Confidence)
		}
		once[par.Symbol] = scaled(e, 1/unit)
	}
	for symbol, name := range same {
		out[symbol] = once[name]
	}
	return out
}

// formParameter is parameter i of a form.
func formParameter(form models.Form, fr models.Frame, i int) fit.Function {
	return func(p, grad []float64) float64 {
		q, jac := make([]float64, len(form.Params)), make([]float64, len(form.Params)*len(p))
		form.FromCurve(fr, p, q, jac)
		copy(grad, jac[i*len(p):])
		return q[i]
	}
}
