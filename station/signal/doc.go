// Package signal holds the estimators on samples: tone fits, spectra, multitones,
// windows. Pure functions on slices: no input or output, no units, no channels.
// Frequencies are in Hz where a rate in samples per second is given beside them.
package signal
