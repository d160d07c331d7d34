package compare

import "errors"

var errPending = errors.New("the numbers of a comparison are not computed yet")

// Lots compares two lots.
func Lots(reference, candidate Lot, opt Options) (Comparison, error) { return Comparison{}, errPending }

// TrendOf lays several lots out in time.
func TrendOf(lots []Lot, opt Options) (Trend, error) { return Trend{}, errPending }
