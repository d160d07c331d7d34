// Package fit turns the points of one sweep into threshold, gate bias and
// transconductance with their uncertainties, and says no where a number would
// mislead. Slices in, [Result] out.
//
// [One] evaluates one sweep or spot, [Combine] the sweeps of one device, [Clean]
// gives the points that may be used, with the current that is believed, for
// plots. [Codes] explains every warning.
//
// The way of a curve: signs are made those of an n-channel part (work.go), the
// currents of two meters are compared (current.go), parts that do nothing a
// transistor does are told (states.go), impossible points are left out
// (cleaning.go, outliers.go), gate voltages are read off at the currents asked
// for (crossing.go, spot.go), then slopes (transconductance.go), leakage
// (leakage.go) and the extrapolated thresholds of the region (lines.go,
// linear.go).
//
// It reads no files, keeps nothing, knows nothing of lots, and never changes
// the slices it is given. It does not fit the equation of a transistor to the
// whole curve. A number that cannot be had is NaN with a warning, never 0.
package fit
