package models

import (
	"fmt"
	"slices"
	"strings"
)

// catalogue holds every curve in the order in which it is listed. A new curve is
// one file and one line here; Default marks the candidates that are fitted when
// none are named, since a long list finds curvature in noise.
var catalogue = []struct {
	curve     Curve
	isDefault bool
}{
	{Straight(), true},
	{RootPrefactor(), true},
	{LinearPrefactor(), true},
	{PowerPrefactor{}, true},
	{Parallel{}, true},
	{Series{}, true},
	{DriftingHeatCapacity{}, false},
	{TunnellingWigner(), false},
	{TunnellingBell(), false},
	{Vogel{}, false},
	{Deformed{}, false},
}

// All returns every registered curve.
func All() []Curve { return filter(func(bool) bool { return true }) }

// Default returns the curves that are fitted unless others are named.
func Default() []Curve { return filter(func(d bool) bool { return d }) }

// IsDefault reports whether a curve is fitted unless others are named.
func IsDefault(c Curve) bool {
	for _, e := range catalogue {
		if e.curve.Info().Name == c.Info().Name {
			return e.isDefault
		}
	}
	return false
}

func filter(keep func(isDefault bool) bool) []Curve {
	var cs []Curve
	for _, e := range catalogue {
		if keep(e.isDefault) {
			cs = append(cs, e.curve)
		}
	}
	return cs
}

// Lookup finds a curve by its own name or by the name of one of its forms.
func Lookup(name string) (Curve, error) {
	for _, e := range catalogue {
		if e.curve.Info().Name == name {
			return e.curve, nil
		}
		for _, f := range e.curve.Forms() {
			if f.Name == name {
				return e.curve, nil
			}
		}
	}
	return nil, fmt.Errorf("models: no curve or form is named %q; known are %s", name, strings.Join(Names(), ", "))
}

// Names lists every curve and form name, sorted.
func Names() []string {
	var names []string
	for _, e := range catalogue {
		names = append(names, e.curve.Info().Name)
		for _, f := range e.curve.Forms() {
			names = append(names, f.Name)
		}
	}
	slices.Sort(names)
	return names
}

// Select reads a list of candidates: "straight,parallel" replaces the defaults,
// "+vogel" adds to them, "all" takes the whole catalogue. A curve named twice,
// by two of its forms perhaps, is taken once. An empty list gives the defaults.
func Select(list string) ([]Curve, error) {
	list = strings.TrimSpace(list)
	switch list {
	case "":
		return Default(), nil
	case "all":
		return All(), nil
	}
	var cs []Curve
	if strings.HasPrefix(list, "+") {
		cs = Default()
	}
	for _, name := range strings.Split(list, ",") {
		c, err := Lookup(strings.TrimPrefix(strings.TrimSpace(name), "+"))
		if err != nil {
			return nil, err
		}
		same := func(o Curve) bool { return o.Info().Name == c.Info().Name }
		if !slices.ContainsFunc(cs, same) {
			cs = append(cs, c)
		}
	}
	return cs, nil
}
