// Package fit turns the points of one sweep into threshold, gate bias and
// transconductance with their uncertainties, and says no where a number would
// mislead. Slices in, [Result] out.
//
// It reads no files, keeps nothing, knows nothing of lots, and never changes
// the slices it is given. A number that cannot be had is NaN with a warning,
// never 0.
package fit
