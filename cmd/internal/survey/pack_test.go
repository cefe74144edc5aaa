package survey

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"strings"
	"testing"
)

// Stores that were written with a dictionary need it to be read, to the last byte.
func TestDictionaryStays(t *testing.T) {
	sum := sha256.Sum256(firstDictionary)
	if got := hex.EncodeToString(sum[:]); got != "f38ecf15e1df357f073367eeefdf55338376388d16ca7c63a55e334a186fde27" {
		t.Errorf("dictionary 1 was changed (%s): give the new one the next number", got)
	}
}

func TestPack(t *testing.T) {
	for _, doc := range []string{"", "{}", strings.Repeat("x", 1<<20), string(firstDictionary[:20000])} {
		packed := pack([]byte(doc), nil)
		got, err := unpack(packed)
		if err != nil || string(got) != doc {
			t.Errorf("%d bytes come back as %d, %v", len(doc), len(got), err)
		}
		for i := range packed { // a changed byte is noticed
			bad := bytes.Clone(packed)
			bad[i] ^= 0x40
			if got, err := unpack(bad); err == nil && string(got) != doc {
				t.Errorf("byte %d of %d changed: another document", i, len(packed))
			}
			if i > 200 {
				break
			}
		}
	}
	if p := pack(firstDictionary[:20000], nil); len(p) > 1000 {
		t.Errorf("a document that is in the dictionary takes %d bytes", len(p))
	}
}
