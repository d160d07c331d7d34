package compare

func (c *comparing) curves() *Band     { return nil }
func (c *comparing) gain() *Gain       { return nil }
func (c *comparing) goingOn() []Option { return nil }

// TrendOf lays several lots out in time.
func TrendOf(lots []Lot, opt Options) (Trend, error) { return Trend{}, ErrFewLots }
