package models

import (
	"fmt"
	"slices"
	"strings"
)

// registry lists curves, some of which are fitted when none are named.
type registry []struct {
	curve     Curve
	isDefault bool
}

// catalogue holds every curve in the order in which it is listed. A new curve is
// one file and one line here; Default marks the candidates that are fitted when
// none are named, since a long list finds curvature in noise.
var catalogue = registry{
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
func All() []Curve { return catalogue.all() }

// Default returns the curves that are fitted unless others are named.
func Default() []Curve { return catalogue.defaults() }

// IsDefault reports whether a curve is fitted unless others are named.
func IsDefault(c Curve) bool {
	for _, e := range catalogue {
		if e.curve.Info().Name == c.Info().Name {
			return e.isDefault
		}
	}
	return false
}

func (r registry) all() []Curve { return r.filter(func(bool) bool { return true }) }

func (r registry) defaults() []Curve { return r.filter(func(d bool) bool { return d }) }

func (r registry) filter(keep func(isDefault bool) bool) []Curve {
	var cs []Curve
	for _, e := range r {
		if keep(e.isDefault) {
			cs = append(cs, e.curve)
		}
	}
	return cs
}

// Lookup finds a curve by its own name or by the name of one of its forms.
func Lookup(name string) (Curve, error) { return catalogue.lookup(name) }

func (r registry) lookup(name string) (Curve, error) {
	for _, e := range r {
		if e.curve.Info().Name == name {
			return e.curve, nil
		}
		for _, f := range e.curve.Forms() {
			if f.Name == name {
				return e.curve, nil
			}
		}
	}
	return nil, fmt.Errorf("models: no curve or form is named %q; known are %s", name, strings.Join(r.names(), ", "))
}

// Names lists every curve and form name, sorted.
func Names() []string { return catalogue.names() }

func (r registry) names() []string {
	var names []string
	for _, e := range r {
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
func Select(list string) ([]Curve, error) { return catalogue.selected(list) }

func (r registry) selected(list string) ([]Curve, error) {
	list = strings.TrimSpace(list)
	switch list {
	case "":
		return r.defaults(), nil
	case "all":
		return r.all(), nil
	}
	var cs []Curve
	if strings.HasPrefix(list, "+") {
		cs = r.defaults()
	}
	for _, name := range strings.Split(list, ",") {
		c, err := r.lookup(strings.TrimPrefix(strings.TrimSpace(name), "+"))
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
