package diagnostics

import (
	"context"
	"encoding/json"
	"math"
	"math/rand/v2"
	"sync"
	"testing"

	"onebarrier/models/dataset"
)

// TestDesignsKeptChangeNothing: the documents of many data sets are the same bytes with
// and without kept designs, whatever order they come in, and few are kept.
func TestDesignsKeptChangeNothing(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 2))
	var sets []*dataset.Set
	for i := range 12 {
		set := &dataset.Set{Name: "invented", Quantity: dataset.Quantity{Symbol: "k", Unit: "s^-1", Known: true}}
		for j := range 8 {
			temp := 280 + 8*float64(j)
			switch i % 3 { // of designs nearly alike, too
			case 1:
				temp = math.Nextafter(temp, 400)
			case 2:
				temp += 1
			}
			const r = 8.314462618
			k := math.Exp(20 - 60e3/(r*temp) + 0.02*rng.NormFloat64())
			if i > 5 {
				k += math.Exp(40 - 110e3/(r*temp))
			}
			set.Points = append(set.Points, dataset.Point{Row: j + 2, T: temp, K: k, Used: true})
		}
		sets = append(sets, set)
	}
	opt := DefaultOptions()
	opt.Resamples, opt.SequentialNull, opt.Workers = 99, true, 1
	judge := func(i int, opt Options) string {
		a, err := Assess(context.Background(), sets[i], opt)
		if err != nil {
			t.Error(err)
			return ""
		}
		b, err := json.Marshal(a)
		if err != nil {
			t.Error(err)
		}
		return string(b)
	}
	var alone []string
	for i := range sets {
		alone = append(alone, judge(i, opt))
	}
	kept := opt
	kept.Designs = &DesignCache{Most: 4}
	var workers sync.WaitGroup
	for w := range 3 {
		workers.Go(func() {
			for j := range sets {
				i := (j*5 + w) % len(sets)
				if judge(i, kept) != alone[i] {
					t.Errorf("set %d differs", i)
				}
			}
		})
	}
	workers.Wait()
	if n := len(kept.Designs.designs); n < 3 || n > 4 {
		t.Errorf("%d designs kept", n)
	}
}
