package diagnostics

import (
	"encoding/binary"
	"math"
	"sync"

	"onebarrier/models/fit"
)

// DesignCache keeps what the second-barrier test needs of each design: its shapes
// and its drawn null, which cost a hundred times more than testing one data set.
// Designs are the same where temperatures, T_ref, variances and nuisance columns are, to
// the last bit: no result depends on what was kept. The zero value is ready, and grows with
// every new design; it may be used from several goroutines.
type DesignCache struct {
	// Most, if not 0, is the number of designs kept, those used last. Designs of more
	// than 200 points are then not kept.
	Most int

	mu      sync.Mutex
	used    uint64 // times asked
	designs map[string]*keptDesign
}

type keptDesign struct {
	made   sync.Once
	design *secondBarrierDesign // nil: the test cannot be run
	used   uint64               // when last
}

// test is NewSecondBarrierTest from the cache. A nil cache keeps nothing, and
// errors additive in k are not kept: their design depends on the data.
func (c *DesignCache) test(s *fit.Sample, straight *fit.Result, nuisance [][]float64) *SecondBarrierTest {
	if c == nil || s.Model.InK() || c.Most > 0 && s.Len() > 200 {
		return NewSecondBarrierTest(s, straight, nuisance)
	}
	k := c.find(designKey(s, nuisance))
	k.made.Do(func() {
		if b := NewSecondBarrierTest(s, straight, nuisance); b != nil {
			k.design = b.secondBarrierDesign
		}
	})
	if k.design == nil {
		return nil
	}
	return &SecondBarrierTest{s: s, nuisance: nuisance, cache: c, secondBarrierDesign: k.design}
}

// find returns the place of a design.
func (c *DesignCache) find(key []byte) *keptDesign {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.used++
	k := c.designs[string(key)]
	if k == nil {
		if c.designs == nil {
			c.designs = map[string]*keptDesign{}
		}
		if c.Most > 0 && len(c.designs) >= c.Most {
			c.dropOldest()
		}
		k = new(keptDesign)
		c.designs[string(key)] = k
	}
	k.used = c.used
	return k
}

func (c *DesignCache) dropOldest() {
	var oldest string
	least := c.used
	for key, k := range c.designs {
		if k.used < least {
			oldest, least = key, k.used
		}
	}
	delete(c.designs, oldest)
}

// designKey spells a design out.
func designKey(s *fit.Sample, nuisance [][]float64) []byte {
	key := make([]byte, 0, 8*(1+len(s.T)*(2+len(nuisance))))
	put := func(x float64) { key = binary.LittleEndian.AppendUint64(key, math.Float64bits(x)) }
	put(s.TRef) // for the last bits of 1/T - 1/T_ref
	for i, t := range s.T {
		put(t)
		put(s.V[i])
		for _, c := range nuisance {
			put(c[i])
		}
	}
	return key
}
