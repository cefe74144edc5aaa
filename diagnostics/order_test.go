package diagnostics

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"onebarrier/models"
	"onebarrier/models/dataset"
	"onebarrier/models/reference"
)

// Spearman's test against R's cor.test (golden_leaveout.csv): exact up to nine pairs,
// by t beyond and with ties.
func TestSpearmanAgainstR(t *testing.T) {
	g := reference.Golden(t, "golden_leaveout.csv")
	for i, c := range []struct {
		x, y  []float64
		exact bool
	}{
		{[]float64{3, 1, 4, 2, 5}, []float64{0.1, -0.3, 0.5, 0.2, 0.4}, true},
		{[]float64{2, 7, 1, 8, 3, 6, 4, 5}, []float64{0.3, 0.1, -0.2, 0.9, -0.5, 0.4, 0.25, -0.1}, true},
		{[]float64{9, 7, 8, 6, 5, 3, 4, 1, 2}, []float64{-4, -1, -3, 0.5, 0.2, 0.1, 1, 3, 2}, true},
		{[]float64{1, 3, 2, 4}, []float64{1, 2, 3, 4}, true},
		{[]float64{12, 3, 7, 1, 9, 2, 11, 4, 8, 5, 10, 6}, []float64{0.9, 0.4, 0.1, -0.6, 0.3, 0.2, 1.4, -0.2, 0.5, 1.1, 0.7, -0.1}, false},
		{[]float64{1, 2, 2, 3, 5, 4, 6}, []float64{0.1, 0.2, 0.4, 0.3, 0.9, 0.5, 0.6}, false},
	} {
		name := fmt.Sprintf("case%d", i+1)
		rho, p, exact := spearman(c.x, c.y)
		reference.Close(t, name+" rho", rho, g.Of(t, "spearman", name, "rho"), 1e-12)
		reference.Close(t, name+" p", p, g.Of(t, "spearman", name, "p"), 1e-10)
		if exact != c.exact {
			t.Errorf("%s: exact is %t", name, exact)
		}
	}
	// Closed forms: of n! orders one agrees and one is its reverse.
	up := []float64{1, 2, 3, 4, 5, 6}
	for _, y := range [][]float64{up, {6, 5, 4, 3, 2, 1}} {
		if _, p, _ := spearman(up, y); math.Abs(p-2.0/720) > 1e-15 {
			t.Errorf("p = %g", p)
		}
	}
}

// orderedSet gives a straight set an order of runs and a drift with it, in ln k.
func orderedSet(order []float64, drift float64, seed uint64) *dataset.Set {
	s := lineSet(len(order), 290, 345, 60000, 0.004, seed)
	for i, o := range order {
		s.Points[i].Order = o
		s.Points[i].K *= math.Exp(drift * o)
	}
	return s
}

func TestRunOrder(t *testing.T) {
	ordered := func(order []float64, drift float64, seed uint64) *Assessment {
		return mustAssess(t, orderedSet(order, drift, seed), quick())
	}
	mixed := []float64{4, 9, 1, 7, 2, 10, 5, 8, 3, 6}
	a := ordered(mixed, 0.02, 5)
	if !a.finding("drift-with-order") || a.finding("order-follows-temperature") || a.RunOrder == nil || a.RunOrder.Points != 10 || a.RunOrder.Residual < 0.8 {
		t.Errorf("%+v", a.RunOrder)
	}
	if a := ordered(mixed, -0.02, 5); !a.finding("drift-with-order") || a.RunOrder.Residual > -0.8 {
		t.Errorf("%+v", a.RunOrder)
	}
	if a := ordered(mixed, 0, 5); a.finding("drift-with-order") || a.finding("order-follows-temperature") {
		t.Errorf("%+v", a.RunOrder)
	}
	for _, down := range []bool{false, true} {
		order := []float64{1, 2, 3, 4, 6, 5, 7, 8, 9, 10}
		if down {
			for i := range order {
				order[i] = -order[i]
			}
		}
		if a := ordered(order, 0, 5); !a.finding("order-follows-temperature") || !a.RunOrder.OrderFollows || (a.RunOrder.Temperature < 0) != down {
			t.Errorf("%+v", a.RunOrder)
		}
	}
	// Of repeats each counts by itself, though the verdict uses their means.
	three := orderedSet(mixed, 0, 5)
	for i, p := range three.Points[:10] {
		for j := range 2 {
			p.Order += 10
			p.Row = 12 + 2*i + j
			three.Points = append(three.Points, p)
		}
	}
	for i := range three.Points {
		three.Points[i].K *= math.Exp(0.01 * three.Points[i].Order)
	}
	if a := mustAssess(t, three, quick()); a.RunOrder.Points != 30 || a.RunOrder.Residual < 0.9 {
		t.Errorf("repeats: %+v", a.RunOrder)
	}
	if a := mustAssess(t, lineSet(8, 290, 345, 60000, 0.01, 1), quick()); a.RunOrder != nil {
		t.Error("an order where none was given")
	}
	if a := ordered([]float64{3, 3, 3, 3, 3, 3}, 0, 1); a.RunOrder != nil {
		t.Error("an order that is one number")
	}
}

// The share of false alarms is that of the level, although residuals are not quite
// independent: at most 6 % in 2000 sets (standard error 0.5 %).
func TestDriftFalseAlarms(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for _, n := range []int{6, 9, 12} {
		hits, sets := 0, 2000
		order := make([]float64, n)
		for i := range sets {
			for j, k := range rng.Perm(n) {
				order[j] = float64(k)
			}
			if slices.Contains(screened(t, orderedSet(order, 0, uint64(i)), lean(), (*assessor).runOrder), "drift-with-order") {
				hits++
			}
		}
		if share := float64(hits) / float64(sets); share > 0.06 {
			t.Errorf("N = %d: %.3f", n, share)
		} else {
			t.Logf("N = %d: %.3f", n, share)
		}
	}
}

// lean are options for what needs the verdict alone.
func lean() Options {
	o := quick()
	o.Models = []models.Curve{models.Straight(), models.PowerPrefactor{}}
	return o
}

// screened are the findings of one step on a screened set.
func screened(t *testing.T, s *dataset.Set, o Options, step func(*assessor)) (codes []string) {
	t.Helper()
	r, err := Screen(s, o)
	if err != nil {
		t.Fatal(err)
	}
	r.a.findings = nil
	step(r.a)
	for _, f := range r.a.findings {
		codes = append(codes, f.Code)
	}
	return codes
}
