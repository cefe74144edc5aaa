package models

import (
	"math"
	"testing"

	"onebarrier/models/reference"
)

// Logarithms of κ in 50-digit arithmetic, mpmath 1.2.1:
//
//	mp.dps = 50; log1p(u*u/24), log((u/2)/sin(u/2))
func TestTunnellingCorrections(t *testing.T) {
	for _, c := range []struct{ u, wigner, bell float64 }{
		{1.0e-6, 4.1666666666665799e-14, 4.1666666666667014e-14},
		{0.001, 4.1666665798611135e-8, 4.1666667013888894e-8},
		{0.05, 0.00010416124169617524, 0.00010416883689167622},
		{0.5, 0.010362787035546584, 0.010438454577899354},
		{0.999, 0.040742031323283909, 0.041934793520382877},
		{1.0, 0.04082199452025513, 0.042019505825368962},
		{1.001, 0.040902031317225242, 0.042104305801680757},
		{2.0, 0.1541506798272583, 0.17260374626909168},
		{4.0, 0.51082562376599068, 0.78823021665510594},
		{5.5, 0.81554916207262331, 1.9748234314360734},
		{6.2, 0.95615226529928569, 4.3115221766337064},
	} {
		if l, _, _ := wigner(c.u * c.u); !reference.Agrees(l, c.wigner, 4e-16) {
			t.Errorf("ln κ of Wigner at u = %g is %.17g, want %.17g", c.u, l, c.wigner)
		}
		// Near the pole a rounding of u is magnified.
		if l, _, _ := bell(c.u * c.u); !reference.Agrees(l, c.bell, 4e-15) {
			t.Errorf("ln κ of Bell at u = %g is %.17g, want %.17g", c.u, l, c.bell)
		}
	}
	// They meet as u → 0: both κ - 1 are u²/24, and differ by u⁴ (7/5760 - 0).
	const u = 1e-2
	lw, _, _ := wigner(u * u)
	lb, _, _ := bell(u * u)
	if kappa := math.Expm1(lb) - math.Expm1(lw); !reference.Agrees(kappa, 7*u*u*u*u/5760, 1e-4) {
		t.Errorf("κ of Bell less κ of Wigner at u = %g is %g, want 7u⁴/5760", u, kappa)
	}
	for _, v := range []float64{4 * math.Pi * math.Pi, 41, -5} {
		if l, _, _ := bell(v); !math.IsNaN(l) {
			t.Errorf("ln κ of Bell at u² = %g is %g, want NaN", v, l)
		}
	}
}

// κ where it is known without a computer: Bell's at angles u/2 whose sine is, π/6, π/4, π/3,
// π/2 and 5π/6; Wigner's at whole u, 1 + u²/24.
func TestTunnellingInClosedForm(t *testing.T) {
	for _, c := range []struct{ half, sine float64 }{
		{math.Pi / 6, 0.5}, {math.Pi / 4, math.Sqrt2 / 2}, {math.Pi / 3, math.Sqrt(3) / 2}, {math.Pi / 2, 1}, {5 * math.Pi / 6, 0.5},
	} {
		l, _, _ := bell(4 * c.half * c.half)
		reference.Close(t, "κ of Bell", math.Exp(l), c.half/c.sine, 1e-14)
	}
	for u, kappa := range map[float64]float64{2: 7. / 6, 6: 2.5, 12: 7} {
		l, _, _ := wigner(u * u)
		reference.Close(t, "κ of Wigner", math.Exp(l), kappa, 1e-15)
	}
}

// ln k and E_loc for ln A = 25, E = 60 kJ/mol, ν = 900 cm^-1 in 50-digit arithmetic,
// mpmath 1.2.1: E_loc = R*T*T*diff(lnk, T), u = h c ν/(k_B T) with the constants of the SI.
func TestTunnellingAgainstMpmath(t *testing.T) {
	for _, c := range []struct {
		curve    Tunnelling
		t, ln, e float64
	}{
		{TunnellingWigner(), 290, 0.72078426937579868, 57811.732606796971},
		{TunnellingWigner(), 300, 1.5200500497128447, 57819.820371991527},
		{TunnellingWigner(), 400, 7.3214658174758393, 57978.3233669589},
		{TunnellingBell(), 290, 1.1563472784418866, 53395.43301818003},
		{TunnellingBell(), 300, 1.8982277321302465, 53921.788975812312},
		{TunnellingBell(), 400, 7.4418673201412114, 56416.552812656909},
	} {
		p := make([]float64, 3)
		c.curve.Forms()[0].ToCurve(Frame{TRef: 320, TForm: 320}, []float64{25, 60, 900}, p)
		f, e := make([]float64, 1), make([]float64, 1)
		c.curve.LnK(320, []float64{c.t}, p, f, nil)
		c.curve.ELoc(320, []float64{c.t}, p, e, nil)
		if !reference.Agrees(f[0], c.ln, 1e-13) || !reference.Agrees(e[0], c.e, 1e-13) {
			t.Errorf("%s at %g K: %.17g and %.17g, want %.17g and %.17g", c.curve.Info().Name, c.t, f[0], e[0], c.ln, c.e)
		}
	}
}

// ∫ (T - T_ref)²/(2 T_ref T²) dT from T_ref = 300 K by mpmath's quad in 50-digit
// arithmetic.
func TestDriftColumn(t *testing.T) {
	for temp, want := range map[float64]float64{
		300.000001: 6.1728394753086421e-27,
		300.01:     6.1725308765427526e-15,
		301:        6.1420983098120584e-9,
		330:        0.0001443656502205945,
		150:        -0.056852819440054691,
		1000:       0.31269386234073067,
	} {
		tol := 1e-14
		if d := math.Abs(temp - 300); d < 0.1 {
			tol = 4 * 300 * 0x1p-52 / d // the rounding of T itself
		}
		if got := sinhLess(300, temp); !reference.Agrees(got, want, tol) {
			t.Errorf("at %v K: %.17g, want %.17g", temp, got, want)
		}
	}
}

// E_ref ln(1 - δx)/δ and E_ref/(1 - δx) at 250 K, T_ref = 300 K, E_ref = 60 kJ/mol, in
// 50-digit arithmetic (mpmath 1.2.1); δ → 0 is Arrhenius, -E_ref x.
func TestDeformedAgainstMpmath(t *testing.T) {
	for _, c := range []struct{ delta, ln, e float64 }{
		{1e-9, -4.8108942017092345, 60000.000000004811},
		{1e-3, -4.8108943945815771, 60000.004810894587},
		{5, -4.8118588221594324, 60024.06411850256},
		{900, -4.9933102216225832, 64666.559653200836},
		{1250, -5.0694109466791731, 66683.482947080716},
		{-2000, -4.4619902370311802, 51707.950665387646},
	} {
		f, e := make([]float64, 1), make([]float64, 1)
		p := []float64{0, 60e3, c.delta}
		Deformed{}.LnK(300, []float64{250}, p, f, nil)
		Deformed{}.ELoc(300, []float64{250}, p, e, nil)
		if !reference.Agrees(f[0], c.ln, 1e-15) || !reference.Agrees(e[0], c.e, 1e-15) {
			t.Errorf("δ = %g: %.17g and %.17g, want %.17g and %.17g", c.delta, f[0], e[0], c.ln, c.e)
		}
	}
	zero, line := make([]float64, len(temps)), make([]float64, len(temps))
	Deformed{}.LnK(300, temps, []float64{2, 5e4, 0}, zero, nil)
	Straight().LnK(300, temps, []float64{2, 5e4}, line, nil)
	for i := range temps {
		if !reference.Agrees(zero[i], line[i], 1e-15) {
			t.Errorf("δ = 0 at %g K: %.17g, the straight line gives %.17g", temps[i], zero[i], line[i])
		}
	}
	// No value where 1 - δx <= 0.
	f := make([]float64, 1)
	if Deformed.LnK(Deformed{}, 300, []float64{100}, []float64{0, 5e4, 2e3}, f, nil); !math.IsNaN(f[0]) {
		t.Errorf("past the end of its domain ln k is %g, want NaN", f[0])
	}
}

// Closed forms: at T_half half of the catalyst is active, k = k_Arr/2; far below and
// far above it the slower step is all there is; k has its maximum where
// ΔH_d (1 - share) = E, share the active part (dln k/dT = 0).
func TestReversibleInactivation(t *testing.T) {
	fr := Frame{TRef: 310, TForm: 310}
	var form Form
	for _, f := range (Series{}).Forms() {
		if f.Name == "reversible-inactivation" {
			form = f
		}
	}
	const lnA, e, dH, half = 25., 50., 300., 325.
	p := make([]float64, 4)
	form.ToCurve(fr, []float64{lnA, e, dH, half}, p)
	arr := func(t float64) float64 { return lnA - 1000*e/(8.31446261815324*t) }
	at := func(t float64) (f, el float64) {
		a, b := make([]float64, 1), make([]float64, 1)
		Series{}.LnK(310, []float64{t}, p, a, nil)
		Series{}.ELoc(310, []float64{t}, p, b, nil)
		return a[0], b[0]
	}
	if f, el := at(half); !reference.Agrees(f, arr(half)-math.Ln2, 1e-13) || !reference.Agrees(el, 1000*(e-dH/2), 1e-13) {
		t.Errorf("at T_half ln k = %.15g, want ln(k_Arr/2) = %.15g; E_loc %g", f, arr(half)-math.Ln2, el)
	}
	if f, el := at(270); !reference.Agrees(f, arr(270), 1e-9) || !reference.Agrees(el, 1000*e, 1e-6) {
		t.Errorf("far below T_half ln k = %.15g, want that of the active catalyst, %.15g; E_loc %g", f, arr(270), el)
	}
	// exp(-(ΔH_d/R)(1/T - 1/T_half)) = E/(ΔH_d - E)
	top := 1 / (1/half - 8.31446261815324/(1000*dH)*math.Log(e/(dH-e)))
	if _, el := at(top); !(math.Abs(el) < 1e-6) {
		t.Errorf("at %g K, where k is largest, E_loc = %g J/mol, want 0", top, el)
	}
}

// The slower step decides, and where it is slower by far the other one does not show.
func TestSeriesLimits(t *testing.T) {
	p := []float64{0, 20e3, 0, 90e3} // equal at T_ref
	for temp, c := range map[float64][2]float64{100: {0, 90e3}, 3000: {0, 20e3}} {
		f, e, line := make([]float64, 1), make([]float64, 1), make([]float64, 1)
		Series{}.LnK(300, []float64{temp}, p, f, nil)
		Series{}.ELoc(300, []float64{temp}, p, e, nil)
		Straight().LnK(300, []float64{temp}, c[:], line, nil)
		if !reference.Agrees(e[0], c[1], 1e-9) || !(math.Abs(f[0]-line[0]) < 1e-9) {
			t.Errorf("at %g K: ln k %g, E_loc %g, want those of the slow step, %g and %g", temp, f[0], e[0], line[0], c[1])
		}
	}
	for _, temp := range temps {
		// 1/k = 1/k1 + 1/k2 in so many words.
		f := make([]float64, 1)
		Series{}.LnK(300, []float64{temp}, []float64{1, 20e3, 2, 90e3}, f, nil)
		x := (1/temp - 1./300) / 8.31446261815324
		want := 1 / (math.Exp(20e3*x-1) + math.Exp(90e3*x-2))
		if !reference.Agrees(math.Exp(f[0]), want, 1e-12) {
			t.Errorf("at %g K: k = %g, want %g", temp, math.Exp(f[0]), want)
		}
	}
}
