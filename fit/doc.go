// Package fit turns the points of one sweep into threshold, gate bias and
// transconductance with their uncertainties, and says no where a number would
// mislead. Slices in, [Result] out.
//
// [One] evaluates one sweep or spot, [Combine] the sweeps of one device and [Drift]
// what changed between them; [ShapeOfLot] gathers what helps a device with too few
// points; [Clean] gives the points that may be used, with the current that is
// believed, for plots. [Codes] explains every warning.
//
// The way of a curve: signs are made those of an n-channel part (work.go), the
// currents of two meters are compared (current.go), parts that do nothing a
// transistor does are told (states.go), impossible points are left out
// (cleaning.go, outliers.go), the transfer model with its circuit (model.go,
// channel.go, transfer.go) is laid through the whole curve (whole.go), gate voltages
// are read off at the currents asked for (crossing.go, spot.go; between coarse points
// along the model, along.go and alongread.go), then slopes (transconductance.go),
// leakage (leakage.go), thresholds (wholeresult.go, lines.go, linear.go) and the curve
// at fixed currents (levels.go). Every uncertainty is a sum of contributions
// (budget.go).
//
// It reads no files, keeps nothing, knows nothing of lots, and never changes
// the slices it is given. A number that cannot be had is NaN with a warning, never 0.
package fit
