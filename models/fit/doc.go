// Package fit fits curves to rate constants under an error model: by a
// closed-form QR for curves that are linear in their parameters, by a global
// search and Newton steps on the projected problem for curves with a shape, and
// by a general least-squares engine for everything else.
package fit
