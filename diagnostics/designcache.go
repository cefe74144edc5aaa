package diagnostics

import (
	"strconv"
	"sync"

	"onebarrier/models/fit"
)

// DesignCache keeps what the second-barrier test needs of each design: its shapes
// and its drawn null, which cost a hundred times more than testing one data set.
// Designs are the same where temperatures, variances and nuisance columns agree to
// ten digits. The zero value is ready; it may be used from several goroutines. It
// grows with every new design: use one for data sets that share designs.
type DesignCache struct {
	mu      sync.Mutex
	designs map[string]*secondBarrierDesign // nil: the test cannot be run
}

// test is NewSecondBarrierTest from the cache. A nil cache keeps nothing, and
// errors additive in k are not kept: their design depends on the data.
func (c *DesignCache) test(s *fit.Sample, straight *fit.Result, nuisance [][]float64) *SecondBarrierTest {
	if c == nil || s.Model.InK() {
		return NewSecondBarrierTest(s, straight, nuisance)
	}
	key := string(designKey(s, nuisance))
	c.mu.Lock()
	defer c.mu.Unlock()
	d, known := c.designs[key]
	if !known {
		if b := NewSecondBarrierTest(s, straight, nuisance); b != nil {
			d = b.secondBarrierDesign
		}
		if c.designs == nil {
			c.designs = map[string]*secondBarrierDesign{}
		}
		c.designs[key] = d
	}
	if d == nil {
		return nil
	}
	return &SecondBarrierTest{s: s, nuisance: nuisance, cache: c, secondBarrierDesign: d}
}

// designKey spells a design out with ten digits.
func designKey(s *fit.Sample, nuisance [][]float64) []byte {
	var key []byte
	put := func(x float64) { key = append(strconv.AppendFloat(key, x, 'e', 9, 64), ' ') }
	for i, t := range s.T {
		put(t)
		put(s.V[i])
		for _, c := range nuisance {
			put(c[i])
		}
	}
	return key
}
