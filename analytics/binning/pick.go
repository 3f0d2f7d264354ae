package binning

import "epitally/analytics/wafermap"

// PickPlanes gives the planes of one measurement in the order that Bin wants
// them, nil where the measurement does not have the quantity.
func PickPlanes(s *Spec, planes []wafermap.Plane) []*wafermap.Plane {
	names := s.Quantities()
	picked := make([]*wafermap.Plane, len(names))
	for i, name := range names {
		for j := range planes {
			if planes[j].Quantity == name {
				picked[i] = &planes[j]
			}
		}
	}
	return picked
}
