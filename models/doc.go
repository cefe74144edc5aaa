// Package models holds the temperature models of rate constants: curves,
// the physical forms in which each curve is read, and their registry.
//
// A curve is one distinct function ln k(T). Some models that are listed as
// rivals are the same function written twice, so curves are what is fitted and
// ranked, and every form (a physical parametrisation) is printed beneath its
// curve. Curves that differ only in a fixed exponent of T form one family.
//
// Every curve is fitted in canonical parameters, which describe it at a
// reference temperature T_ref inside the data: a = ln k(T_ref), an energy in
// J/mol, and so on. ln A and E are almost perfectly correlated; ln k(T_ref) and
// E are not, and nothing is lost to rounding.
//
// The package is a leaf: it knows neither data nor files. T is in kelvin,
// energies are in J/mol in canonical parameters and in kJ/mol in forms, and k is
// in whatever unit the caller measured it in.
package models
