// Package bias lays out the gate bias of a lot: the gate voltage of each device at the
// idle current, what a divider with or without a trimmer gives and how much of
// the lot that serves, which resistors would serve it better, how the current follows
// temperature, and what devices on one gate line share of a total current.
//
// It refuses to claim a current where neither curve nor gain of a device tells it, and
// to apply a temperature coefficient that nobody gave or measured: a typical one is
// only shown.
package bias
