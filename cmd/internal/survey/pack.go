package survey

import (
	_ "embed"
	"fmt"
	"sync"

	"github.com/klauspost/compress/zstd"
)

// Documents are packed one by one with Zstandard (RFC 8878). What assessments have in
// common, their names and many of their sentences, is in a dictionary that every
// document refers to by its number. A dictionary is never changed, since stores need
// it to be read: a better one gets the next number.
//
// The first is two assessments of the invented data in testdata/demo, as assess --json
// prints them, without spaces.
//
//go:embed assessment.dict
var firstDictionary []byte

const newestDictionary = 1

// mostDocument is the longest document that is unpacked: longer ones are damage.
const mostDocument = 256 << 20

var packer = sync.OnceValue(func() *zstd.Encoder {
	e, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(1),
		zstd.WithEncoderCRC(true), zstd.WithEncoderDictRaw(newestDictionary, firstDictionary))
	if err != nil {
		panic(err) // wrong options: a bug
	}
	return e
})

var unpacker = sync.OnceValue(func() *zstd.Decoder {
	d, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(0), zstd.WithDecoderMaxMemory(mostDocument),
		zstd.WithDecoderDictRaw(newestDictionary, firstDictionary))
	if err != nil {
		panic(err)
	}
	return d
})

// pack appends a packed document to dst. It may be called from several goroutines.
func pack(document, dst []byte) []byte { return packer().EncodeAll(document, dst) }

// unpack gives the document back. Its checksum is verified.
func unpack(packed []byte) ([]byte, error) {
	document, err := unpacker().DecodeAll(packed, nil)
	if err != nil {
		return nil, fmt.Errorf("an assessment is damaged: %w", err)
	}
	return document, nil
}
