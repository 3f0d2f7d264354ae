package simfab

import "math"

// carrier holds the temperature signature that repeats while it is in.
type carrier struct {
	degC []float64 // per pocket, all rings in order; mean 0
	tilt []float64 // direction of the temperature tilt per pocket, radians
}

// growCarriers gives each carrier its pocket offsets: rings 1 to 3 nm apart,
// pockets of a ring about 0.7 nm sd, mean 0 over the carrier so that a change
// of carrier changes the signature and not the reactor.
func (f *Fab) growCarriers() {
	f.carriers = map[string]*carrier{}
	number := uint64(0)
	for i := range f.plans {
		plan := &f.plans[i]
		scale := f.recipe(plan.recipe).optics.nmPerDegC
		for _, name := range plan.carriers {
			r := stream(f.config.Seed, forCarrier, number)
			number++
			c := &carrier{}
			for _, ring := range plan.rings {
				for k := range ring.pockets {
					c.degC = append(c.degC, ring.degC+0.7/scale*min(max(r.NormFloat64(), -2), 2))
					// Gas flows outwards: the tilt points away from the carrier's middle.
					c.tilt = append(c.tilt, 2*math.Pi*float64(k)/float64(ring.pockets)+0.2*r.NormFloat64())
				}
			}
			mean := 0.0
			for _, t := range c.degC {
				mean += t / float64(len(c.degC))
			}
			for j := range c.degC {
				c.degC[j] -= mean
			}
			f.carriers[name] = c
		}
	}
}

// station is how far one station reads from the truth.
type station struct {
	wavelengthNM float64
	voltageV     float64
	lightRatio   float64
}

func growStations(seed uint64) map[string]station {
	all := map[string]station{}
	for i, name := range []string{"mapper-1", "mapper-2", "prober-1", "prober-2", "prober-3"} {
		r := stream(seed, forStation, uint64(i))
		all[name] = station{wavelengthNM: 0.2 * r.NormFloat64(), voltageV: 0.004 * r.NormFloat64(), lightRatio: 0.01 * r.NormFloat64()}
	}
	return all
}
