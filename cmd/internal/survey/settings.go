package survey

import (
	"crypto/sha256"
	"fmt"
	"maps"
	"slices"
	"strings"
)

// Settings are what decides the result of a survey beside the data, by name: flags
// as they stand on the command line without their dashes, and "program", the
// version. What does not decide a result, as the number of workers, is none of them.
type Settings map[string]string

// lines spells the settings out, one a line, in order.
func (s Settings) lines() string {
	var b strings.Builder
	for _, name := range slices.Sorted(maps.Keys(s)) {
		fmt.Fprintf(&b, "%q = %q\n", name, s[name])
	}
	return b.String()
}

// sum is the hash of the settings.
func (s Settings) sum() [sha256.Size]byte { return sha256.Sum256([]byte(s.lines())) }

// Differences lists the settings that differ, one each: name, ours, theirs.
func (s Settings) Differences(other Settings) []string {
	names := maps.Clone(s)
	if names == nil {
		names = Settings{}
	}
	maps.Copy(names, other)
	var out []string
	for _, name := range slices.Sorted(maps.Keys(names)) {
		mine, have := s[name]
		theirs, has := other[name]
		if mine != theirs || have != has {
			out = append(out, fmt.Sprintf("%s: %s here, %s in the store", name, orDefault(mine, have), orDefault(theirs, has)))
		}
	}
	return out
}

func orDefault(value string, given bool) string {
	if !given || value == "" {
		return "the default"
	}
	return value
}
