package match

import "context"

// Match puts the members in sets.
func Match(ctx context.Context, members []Member, opt Options) (*Matching, error) {
	return nil, ErrTooFew
}

// PartnersFor ranks the stock as partners for one device.
func PartnersFor(members []Member, device int, opt Options) ([]Partner, error) {
	return nil, ErrNoDevice
}

// MoreParts estimates how many more sets so many more devices of the lot would give.
func MoreParts(ctx context.Context, members []Member, opt Options, devices []int, runs int, seed uint64) ([]More, error) {
	return nil, ErrTooFew
}

// Share solves for the currents of devices on one gate line.
func Share(members []Member, opt Options) Sharing { return Sharing{} }
