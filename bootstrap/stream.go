package bootstrap

import "math/rand/v2"

// stream is the random stream of one resample at a time. It allocates once.
type stream struct {
	_   [64]byte // its state is written at every draw: see apart
	pcg rand.PCG
	rng *rand.Rand // the same source, for normal deviates
	_   [64]byte
}

func newStream() *stream {
	s := &stream{}
	s.rng = rand.New(&s.pcg)
	return s
}

const goldenGamma = 0x9e3779b97f4a7c15

// splitmix is the output function of SplitMix64, a bijection of the 64-bit words
// in which every input bit reaches every output bit (G. L. Steele, D. Lea and
// C. H. Flood, OOPSLA 2014).
func splitmix(z uint64) uint64 {
	z += goldenGamma
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// reset starts the stream of resample index. Seed and index are hashed first:
// a PCG whose state is merely counted up gives similar first words.
func (s *stream) reset(seed, index uint64) {
	h := splitmix(splitmix(seed) ^ index)
	s.pcg.Seed(h, splitmix(h))
}

// indices fills ix with independent indices below n, two from each 64-bit word
// by multiplication; the unevenness is below n/2³².
func (s *stream) indices(ix []int32, n int) {
	m := uint64(n)
	for i := 0; i < len(ix); i += 2 {
		u := s.pcg.Uint64()
		ix[i] = int32((u & 0xffffffff) * m >> 32)
		if i+1 < len(ix) {
			ix[i+1] = int32((u >> 32) * m >> 32)
		}
	}
}
