package diagnostics

import (
	"bytes"
	"encoding/json"
	"flag"
	"fmt"
	"math"
	"regexp"
	"slices"
	"strings"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/fit"

	"pgregory.net/rapid"
)

// Properties of the whole road, on invented data. A failure prints how to repeat
// it; -rapid.checks=1000 looks harder.

// check runs a property on few data sets unless more were asked for.
func check(t *testing.T, property func(*rapid.T)) {
	t.Helper()
	if f := flag.Lookup("rapid.checks"); f.Value.String() == f.DefValue {
		if err := f.Value.Set("12"); err != nil {
			t.Fatal(err)
		}
		defer f.Value.Set(f.DefValue)
	}
	rapid.Check(t, property)
}

// invented are rate constants with scatter at distinct temperatures, multiples of
// 0.5 °C, along a curve that bends up, down or not at all.
type invented struct {
	celsius, k, u []float64 // u(k) is nil where nothing is stated
}

func draw(rt *rapid.T) invented {
	n := rapid.IntRange(5, 14).Draw(rt, "points")
	step := rapid.IntRange(3, 30).Draw(rt, "half degrees between points")
	from := rapid.IntRange(-100, 200).Draw(rt, "half degrees at the lowest")
	e := 1000 * rapid.Float64Range(20, 200).Draw(rt, "barrier")
	bend := rapid.Float64Range(-20, 20).Draw(rt, "exponent")
	sd := rapid.Float64Range(0.01, 0.1).Draw(rt, "scatter")
	stated := rapid.Bool().Draw(rt, "stated")
	normal := rapid.Custom(func(rt *rapid.T) float64 { // near enough: 12 uniform numbers
		var s float64
		for range 12 {
			s += rapid.Float64Range(-0.5, 0.5).Draw(rt, "part")
		}
		return s
	})
	var d invented
	for i := range n {
		c := float64(from+i*step) / 2
		t := c + 273.15
		z := sd * normal.Draw(rt, "error")
		// Draws of rapid like 0, and data without scatter have no statistics.
		z += sd * []float64{0.5, -0.8, 0.3, 0.9, -0.6}[i%5]
		k := math.Exp(-e/models.GasConstant*(1/t-1/300.) + bend*math.Log(t/300) + z)
		d.celsius, d.k = append(d.celsius, c), append(d.k, k)
		if stated {
			d.u = append(d.u, sd*k)
		}
	}
	return d
}

// table is a file: temperatures as text in their unit, k and u(k) times a factor.
func (d invented) table(heading string, t func(celsius float64) string, unit string, times float64) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s,k/(%s)", heading, unit)
	if d.u != nil {
		fmt.Fprintf(&b, ",u(k)/(%s)", unit)
	}
	for i, c := range d.celsius {
		fmt.Fprintf(&b, "\n%s,%.17g", t(c), d.k[i]*times)
		if d.u != nil {
			fmt.Fprintf(&b, ",%.17g", d.u[i]*times)
		}
	}
	return b.String() + "\n"
}

func (d invented) kelvinTable(unit string, times float64) string {
	return d.table("T/K", func(c float64) string { return fmt.Sprintf("%.2f", c+273.15) }, unit, times)
}

// assessed is the document of a file, without a bootstrap and with models whose
// parameters the data always determine.
func assessed(rt *rapid.T, file string) *Assessment {
	rt.Helper()
	sets, err := dataset.Read("k.csv", strings.NewReader(file), dataset.Options{})
	if err != nil {
		rt.Fatal(err)
	}
	o := quick()
	o.PublishStyle = "molar"
	o.ReferenceTemperature = 310
	o.Models = []models.Curve{models.Straight(), models.RootPrefactor(), models.LinearPrefactor(), models.PowerPrefactor{}}
	a, err := Assess(rt.Context(), sets[0], o)
	if err != nil {
		rt.Fatal(err)
	}
	return a
}

// leaves lists every value of the document by its path. Curves of the ranking are
// named, so that a tie may fall either way.
func leaves(rt *rapid.T, a *Assessment) map[string]any {
	rt.Helper()
	b, err := json.Marshal(a)
	if err != nil {
		rt.Fatal(err)
	}
	var doc any
	if err := json.Unmarshal(b, &doc); err != nil {
		rt.Fatal(err)
	}
	out := map[string]any{}
	var walk func(path string, v any)
	walk = func(path string, v any) {
		switch v := v.(type) {
		case map[string]any:
			for key, w := range v {
				walk(path+"."+key, w)
			}
		case []any:
			for i, w := range v {
				name := fmt.Sprint(i)
				if m, ok := w.(map[string]any); ok {
					for _, key := range []string{"curve", "model", "symbol", "code"} {
						if s, ok := m[key].(string); ok {
							name = s
							break
						}
					}
				}
				walk(path+"/"+name, w)
			}
		default:
			out[path] = v
		}
	}
	walk("", doc)
	return out
}

var numbers = regexp.MustCompile(`[0-9][0-9.]*(\([0-9]+\))?`)

func isText(v any) bool {
	_, is := v.(string)
	return is
}

// same compares two documents leaf by leaf. moved says how far a leaf must have
// moved, and whether it may be compared at all.
func same(rt *rapid.T, a, b *Assessment, moved func(path string) (by float64, compare bool)) {
	rt.Helper()
	x, y := leaves(rt, a), leaves(rt, b)
	// A unit is part of some symbols: lg(A/s^-1).
	for path, v := range y {
		y[strings.ReplaceAll(path, b.Dataset.Quantity.Unit, a.Dataset.Quantity.Unit)] = v
	}
	compared := 0
	for path, v := range x {
		by, compare := moved(path)
		if !compare {
			continue
		}
		w, there := y[path]
		if !there {
			rt.Errorf("%s is gone", path)
			continue
		}
		compared++
		f, isNumber := v.(float64)
		if !isNumber {
			// Numbers in prose are rounded, and a tie may fall either way.
			if v != w && !(isText(v) && isText(w) && numbers.ReplaceAllString(v.(string), "#") == numbers.ReplaceAllString(w.(string), "#")) {
				rt.Errorf("%s: %v and %v", path, v, w)
			}
			continue
		}
		g, _ := w.(float64)
		// Digits are lost where a number is a small difference, as n is of the
		// data, or a covariance: ten of sixteen must be left.
		size := math.Max(math.Abs(f), math.Max(math.Abs(g), 1e-6))
		if strings.HasSuffix(path, ".delta") || strings.Contains(path, "aic") || strings.Contains(path, "bic") || strings.Contains(path, "log_likelihood") {
			size = math.Max(size, 1)
		}
		for _, end := range []string{".estimate", ".lower", ".upper"} {
			if est, ok := strings.CutSuffix(path, end); ok {
				if u, ok := x[est+".std_error"].(float64); ok {
					size = math.Max(size, u)
				}
			}
		}
		if !(math.Abs(g-f-by) <= 1e-7*size) {
			rt.Errorf("%s: %.12g and %.12g, not %+g", path, f, g, by)
		}
	}
	if compared < 200 {
		rt.Errorf("only %d leaves were compared", compared)
	}
}

// scaledDocument says where k times a factor shows: ln_factor is ln of the factor
// as the numbers see it, ln_second that per second and mol/L.
func scaledDocument(a *Assessment, lnFactor, lnSecond float64) func(path string) (float64, bool) {
	n := float64(a.Sample.Len())
	return func(path string) (float64, bool) {
		value := strings.HasSuffix(path, ".estimate") || strings.HasSuffix(path, ".lower") || strings.HasSuffix(path, ".upper")
		has := func(parts ...string) bool {
			return slices.ContainsFunc(parts, func(p string) bool { return strings.Contains(path, p) })
		}
		switch {
		case has(".sha256", ".quantity", ".columns", ".unit", ".symbol"):
			return 0, false // words, and the unit itself
		case has(".data/") && (strings.HasSuffix(path, ".k") || strings.HasSuffix(path, ".u_k")), has(".at_reference.k."):
			return 0, false // k
		case has(".publish.lines/A", ".publish.lines/k") || has(".publish.lines") && strings.HasSuffix(path, ".text"):
			return 0, false // k, A and their digits
		case has(".publish.lines/lg"):
			if value {
				return lnFactor / math.Ln10, true
			}
		case has("/ln_A."):
			if value {
				return lnFactor, true
			}
		case has("/dS.", "lines/ΔS‡."):
			if value {
				return models.GasConstant * lnSecond, true
			}
		case has("/dG.", "lines/ΔG‡."):
			if value {
				return -models.GasConstant * 310 * lnSecond / 1000, true
			}
		case strings.HasSuffix(path, ".log_likelihood"): // a density of k
			return -n * lnFactor, true
		case strings.HasSuffix(path, ".aic"), strings.HasSuffix(path, ".aicc"), strings.HasSuffix(path, ".bic"):
			return 2 * n * lnFactor, true
		}
		return 0, true
	}
}

// k times a constant moves ln A, and with it lg A, ΔS‡, ΔG‡, and the likelihood,
// which is a density of k; nothing else.
func TestScalingKMovesOnlyLnA(t *testing.T) {
	check(t, func(rt *rapid.T) {
		d := draw(rt)
		times := math.Exp(rapid.Float64Range(-30, 30).Draw(rt, "ln factor"))
		a, b := assessed(rt, d.kelvinTable("s^-1", 1)), assessed(rt, d.kelvinTable("s^-1", times))
		same(rt, a, b, scaledDocument(a, math.Log(times), math.Log(times)))
	})
}

// k per mole and per molecule: the number and ln A move by the Avogadro constant
// (exact, SI 2019), ΔS‡ and ΔG‡ do not.
func TestMolAndMolecule(t *testing.T) {
	check(t, func(rt *rapid.T) {
		d := draw(rt)
		a := assessed(rt, d.kelvinTable("cm^3 molecule^-1 s^-1", 1e-15))
		b := assessed(rt, d.kelvinTable("cm^3 mol^-1 s^-1", 1e-15*6.02214076e23))
		scaled := scaledDocument(a, math.Log(6.02214076e23), 0)
		same(rt, a, b, func(path string) (float64, bool) {
			if strings.Contains(path, "/band-narrow-for-gas-phase") { // asked of molecules only
				return 0, false
			}
			return scaled(path)
		})
	})
}

// The unit of T changes nothing.
func TestUnitsOfTemperature(t *testing.T) {
	check(t, func(rt *rapid.T) {
		d := draw(rt)
		a := assessed(rt, d.kelvinTable("s^-1", 1))
		for heading, text := range map[string]func(c float64) string{
			"t/degC":   func(c float64) string { return fmt.Sprintf("%.1f", c) },
			"t/degF":   func(c float64) string { return fmt.Sprintf("%.1f", 1.8*c+32) },
			"1000 K/T": func(c float64) string { return fmt.Sprintf("%.17g", 1000/(c+273.15)) },
		} {
			b := assessed(rt, d.table(heading, text, "s^-1", 1))
			same(rt, a, b, func(path string) (float64, bool) {
				return 0, !strings.Contains(path, ".columns") && !strings.Contains(path, ".sha256")
			})
		}
	})
}

// bytesOf is the document of a set as JSON, rows in order of their line.
func bytesOf(rt *rapid.T, s *dataset.Set, o Options) []byte {
	rt.Helper()
	a, err := Assess(rt.Context(), s, o)
	if err != nil {
		rt.Fatal(err)
	}
	slices.SortFunc(a.Data, func(x, y Datum) int { return x.Row - y.Row })
	b, err := json.Marshal(a)
	if err != nil {
		rt.Fatal(err)
	}
	return b
}

// The order of rows changes no byte, repeats and all five curves and the bootstrap
// included.
func TestOrderOfRows(t *testing.T) {
	check(t, func(rt *rapid.T) {
		d := draw(rt)
		var kelvin []float64
		for _, c := range d.celsius {
			kelvin = append(kelvin, c+273.15)
		}
		if rapid.Bool().Draw(rt, "repeats") {
			kelvin[1], kelvin[len(kelvin)-1] = kelvin[0], kelvin[len(kelvin)-2]
		}
		s := setOf(kelvin, d.k, d.u)
		shuffled := *s
		shuffled.Points = rapid.Permutation(s.Points).Draw(rt, "order")
		o := DefaultOptions()
		o.Resamples = 99
		if a, b := bytesOf(rt, s, o), bytesOf(rt, &shuffled, o); !bytes.Equal(a, b) {
			at := 0
			for at < min(len(a), len(b)) && a[at] == b[at] {
				at++
			}
			rt.Errorf("…%s\nand …%s", a[max(0, at-80):min(len(a), at+40)], b[max(0, at-80):min(len(b), at+40)])
		}
	})
}

// Weights sum to 1, over families and over curves; the 95 % set holds 95 %.
func TestWeightsSumToOne(t *testing.T) {
	check(t, func(rt *rapid.T) {
		d := draw(rt)
		o := quick()
		o.Criterion = rapid.SampledFrom(Criteria).Draw(rt, "criterion")
		sets, err := dataset.Read("k.csv", strings.NewReader(d.kelvinTable("s^-1", 1)), dataset.Options{})
		if err != nil {
			rt.Fatal(err)
		}
		a, err := Assess(rt.Context(), sets[0], o)
		if err != nil {
			rt.Fatal(err)
		}
		var all, families, inSet float64
		seen := map[string]bool{}
		for _, r := range a.Ranking {
			if r.Status != StatusRanked {
				continue
			}
			all += float64(r.Weight)
			if seen[r.Family] {
				continue
			}
			seen[r.Family] = true
			families += float64(r.FamWeight)
			if r.InSet {
				inSet += float64(r.FamWeight)
			}
		}
		if !(math.Abs(all-1) <= 1e-12) || !(math.Abs(families-1) <= 1e-12) || !(inSet >= 0.95-1e-12) {
			rt.Errorf("weights of curves sum to %g, of families to %g, of the 95 %% set to %g", all, families, inSet)
		}
	})
}

// Every point twice: the verdict on means and its intervals stay as they were. On
// single points the standard uncertainty falls by √2 where σ is known, and else by
// sqrt((2N-3)/(N-3)), which also counts the degrees of freedom the copies pretend
// to add.
func TestEveryPointTwice(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		d := draw(rt)
		var kelvin []float64
		for _, c := range d.celsius {
			kelvin = append(kelvin, c+273.15)
		}
		n := float64(len(kelvin))
		twice := setOf(slices.Concat(kelvin, kelvin), slices.Concat(d.k, d.k), slices.Concat(d.u, d.u))
		o := quick()
		known := d.u != nil
		o.ErrorModel = fit.Relative
		ratio := math.Sqrt((2*n - 3) / (n - 3))
		if known {
			o.ErrorModel, ratio = fit.Stated, math.Sqrt2
		}
		screen := func(s *dataset.Set, replicates string) *Screening {
			o := o
			o.Replicates = replicates
			out, err := Screen(s, o)
			if err != nil {
				rt.Fatal(err)
			}
			return out
		}
		once, means := screen(setOf(kelvin, d.k, d.u), ReplicatesMeans), screen(twice, ReplicatesMeans)
		independent := screen(twice, ReplicatesIndependent)
		near := func(what string, got, want float64) {
			if !(math.Abs(got-want) <= 1e-9*math.Max(math.Abs(want), once.Exponent.Exponent.StdError)) {
				rt.Errorf("%s: %.15g, want %.15g", what, got, want)
			}
		}
		near("n on single points", independent.Exponent.Exponent.Value, once.Exponent.Exponent.Value)
		near("u(n) on single points", independent.Exponent.Exponent.StdError, once.Exponent.Exponent.StdError/ratio)
		near("u(n) on single points, beside means", means.Pointwise.Exponent.StdError, once.Exponent.Exponent.StdError/ratio)
		if known {
			return // repeats of known uncertainty do make the means more certain
		}
		near("n on means", means.Exponent.Exponent.Value, once.Exponent.Exponent.Value)
		near("lower end of n on means", means.Exponent.Exponent.Lower, once.Exponent.Exponent.Lower)
		near("upper end of n on means", means.Exponent.Exponent.Upper, once.Exponent.Exponent.Upper)
		if a, b := once.State(), means.State(); a != b {
			rt.Errorf("%s became %s", a, b)
		}
	})
}

// E_loc of every curve is -R d ln k/d(1/T), by Richardson's extrapolation of
// central differences.
func TestLocalEnergyIsTheDerivative(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		const tRef = 310
		c := rapid.SampledFrom(models.All()).Draw(rt, "curve")
		t0 := rapid.Float64Range(200, 1000).Draw(rt, "T")
		p := make([]float64, len(c.Info().Params))
		for j, q := range c.Info().Params {
			switch q.Unit {
			case "J/mol":
				p[j] = 1000 * rapid.Float64Range(-50, 250).Draw(rt, q.Symbol)
			default:
				p[j] = rapid.Float64Range(-10, 10).Draw(rt, q.Symbol)
			}
		}
		if c, ok := c.(models.Seeded); ok {
			low, _, high := c.Bounds(tRef, 190, 1000)
			p[2] = low + (high-low)*rapid.Float64Range(0, 0.9).Draw(rt, "place between the bounds")
		}
		at := func(inverse float64) float64 {
			f := make([]float64, 1)
			c.LnK(tRef, []float64{1 / inverse}, p, f, nil)
			return f[0]
		}
		slope := func(h float64) float64 { return (at((1+h)/t0) - at((1-h)/t0)) / (2 * h / t0) }
		const h = 2e-3
		want := -models.GasConstant * (4*slope(h/2) - slope(h)) / 3
		got := make([]float64, 1)
		c.ELoc(tRef, []float64{t0}, p, got, nil)
		// The next term is h⁴/4 times the fifth derivative: a jump of 300 kJ/mol
		// between two paths makes that 0.2 J/mol at 200 K.
		if !(math.Abs(got[0]-want) <= 1+1e-7*math.Abs(want)) {
			rt.Errorf("%s %v at %g K: E_loc %.10g, derivative %.10g J/mol", c.Info().Name, p, t0, got[0], want)
		}
	})
}
