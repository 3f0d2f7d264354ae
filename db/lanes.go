package db

import (
	"fmt"

	"epitally/analytics"
	"epitally/analytics/binning"
	"epitally/analytics/wafermap"
)

// Lanes gives a stored plane to binning as it lies in the database: an int16
// plane without putting its bytes together, any other decoded. A StoredPlane of
// no dies (the measurement lacks the quantity) gives the zero Lanes.
func (s *StoredPlane) Lanes() (binning.Lanes, error) {
	if s.N == 0 {
		return binning.Lanes{}, nil
	}
	if s.Encoding != wafermap.Int16 {
		p, err := DecodePlane("", *s)
		return binning.Lanes{Plane: &p}, err
	}
	exponent, baseK, ok := s.Scale()
	if !ok || len(s.Data) != 2*s.N {
		return binning.Lanes{}, fmt.Errorf("stored plane of %d dies has %d bytes and resolution %g: %w", s.N, len(s.Data), s.Resolution, analytics.ErrInvalid)
	}
	return binning.Lanes{BaseK: baseK, Exponent: exponent, Lo: s.Data[:s.N], Hi: s.Data[s.N:]}, nil
}
