// Package bootstrap resamples fitted rate constants: how often a repeat of the
// experiment would give each verdict and each first place, and bootstrap
// intervals that check the reported ones.
//
// Every resample has its own random stream, derived from the seed and the number
// of the resample, and every result is stored under that number. Any number of
// workers therefore gives the same bytes (on one architecture: some fuse
// multiplication and addition).
package bootstrap
