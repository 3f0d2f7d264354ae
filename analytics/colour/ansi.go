package colour

import (
	"fmt"
	"math"
	"strings"
)

// quadrangle is a nominal colour temperature of ANSI C78.377 with its basic
// quadrangle.
type quadrangle struct {
	nominalK   int
	targetK    float64
	toleranceK float64
	targetDuv  float64
	corners    [4]XY // low CCT above the locus, high CCT above, high CCT below, low CCT below
}

// duvTolerance is that of all basic quadrangles.
const duvTolerance = 0.006

// basicSteps is how many MacAdam steps a basic quadrangle is commonly said to be
// (common practice).
const basicSteps = 7

// quadrangles are the basic ones by edition. Corners are the printed ones. Source:
// ANSI_NEMA_ANSLG C78.377-2008, table 2, and ANSI C78.377-2015, basic
// quadrangles. Corner 4 of 2500 K in the later edition is printed as x = 0.4797;
// the definition puts it at 0.4799, where it meets corner 3 of 2200 K. The printed
// value is kept, which leaves a sliver between the two. Neighbours of the earlier
// edition overlap in slivers too: where they do, the cell listed first has the die
// unless priorities say otherwise. Target and tolerance come from memory and are
// confirmed by the corners, which a test recomputes.
var quadrangles = map[int][]quadrangle{
	2008: {
		{2700, 2725, 145, 0, [4]XY{{0.4813, 0.4319}, {0.4562, 0.4260}, {0.4373, 0.3893}, {0.4593, 0.3944}}},
		{3000, 3045, 175, 0, [4]XY{{0.4562, 0.4260}, {0.4299, 0.4165}, {0.4147, 0.3814}, {0.4373, 0.3893}}},
		{3500, 3465, 245, 0, [4]XY{{0.4299, 0.4165}, {0.3996, 0.4015}, {0.3889, 0.3690}, {0.4147, 0.3814}}},
		{4000, 3985, 275, 0.001, [4]XY{{0.4006, 0.4044}, {0.3736, 0.3874}, {0.3670, 0.3578}, {0.3898, 0.3716}}},
		{4500, 4503, 243, 0.001, [4]XY{{0.3736, 0.3874}, {0.3548, 0.3736}, {0.3512, 0.3465}, {0.3670, 0.3578}}},
		{5000, 5028, 283, 0.002, [4]XY{{0.3551, 0.3760}, {0.3376, 0.3616}, {0.3366, 0.3369}, {0.3515, 0.3487}}},
		{5700, 5665, 355, 0.002, [4]XY{{0.3376, 0.3616}, {0.3207, 0.3462}, {0.3222, 0.3243}, {0.3366, 0.3369}}},
		{6500, 6530, 510, 0.003, [4]XY{{0.3205, 0.3481}, {0.3028, 0.3304}, {0.3068, 0.3113}, {0.3221, 0.3261}}},
	},
	2015: {
		{2200, 2238, 102, 0, [4]XY{{0.5259, 0.4342}, {0.5045, 0.4344}, {0.4799, 0.3967}, {0.4993, 0.3967}}},
		{2500, 2460, 120, 0, [4]XY{{0.5045, 0.4344}, {0.4813, 0.4319}, {0.4593, 0.3944}, {0.4797, 0.3967}}},
		{2700, 2725, 145, 0, [4]XY{{0.4813, 0.4319}, {0.4562, 0.4260}, {0.4373, 0.3893}, {0.4593, 0.3944}}},
		{3000, 3045, 175, 0.0001, [4]XY{{0.4562, 0.4260}, {0.4303, 0.4173}, {0.4150, 0.3821}, {0.4373, 0.3893}}},
		{3500, 3465, 245, 0.0005, [4]XY{{0.4303, 0.4173}, {0.4003, 0.4035}, {0.3895, 0.3709}, {0.4150, 0.3821}}},
		{4000, 3985, 275, 0.001, [4]XY{{0.4003, 0.4035}, {0.3737, 0.3880}, {0.3671, 0.3583}, {0.3895, 0.3709}}},
		{4500, 4503, 243, 0.0015, [4]XY{{0.3737, 0.3882}, {0.3550, 0.3754}, {0.3514, 0.3482}, {0.3672, 0.3585}}},
		{5000, 5029, 283, 0.002, [4]XY{{0.3550, 0.3753}, {0.3375, 0.3619}, {0.3366, 0.3373}, {0.3515, 0.3481}}},
		{5700, 5667, 355, 0.0025, [4]XY{{0.3375, 0.3619}, {0.3205, 0.3476}, {0.3221, 0.3256}, {0.3366, 0.3374}}},
		{6500, 6532, 510, 0.0031, [4]XY{{0.3205, 0.3477}, {0.3026, 0.3311}, {0.3067, 0.3119}, {0.3221, 0.3255}}},
	},
}

// QuadrangleSteps gives the corners of an ANSI C78.377 quadrangle by edition (2008
// or 2015), nominal colour temperature in kelvin and steps: the printed corners
// of the basic quadrangle for 7, and for 1 to 6 the same definition with both
// tolerances scaled by steps/7 (common practice). Errors wrap
// analytics.ErrInvalid and name what there is.
func QuadrangleSteps(nominalK, edition, steps int) ([4]XY, error) {
	list, ok := quadrangles[edition]
	if !ok {
		return [4]XY{}, invalid("edition %d of ANSI C78.377 is not known: use 2008 or 2015", edition)
	}
	if steps < 1 || steps > basicSteps {
		return [4]XY{}, invalid("a quadrangle of %d steps: use 1 to %d, of which %d is the basic one", steps, basicSteps, basicSteps)
	}
	var known []string
	for _, q := range list {
		if q.nominalK != nominalK {
			known = append(known, fmt.Sprint(q.nominalK))
			continue
		}
		if steps == basicSteps {
			return q.corners, nil
		}
		return q.scaled(edition, float64(steps)/basicSteps)
	}
	return [4]XY{}, invalid("ANSI C78.377-%d has no nominal colour temperature of %d K: use %s", edition, nominalK, strings.Join(known, ", "))
}

// scaled is the quadrangle of the definition with its tolerances times a factor.
func (q quadrangle) scaled(edition int, factor float64) (out [4]XY, err error) {
	low, high := q.targetK-factor*q.toleranceK, q.targetK+factor*q.toleranceK
	for i, c := range []CCT{{low, +1}, {high, +1}, {high, -1}, {low, -1}} {
		centre := q.targetDuv
		if edition >= 2015 {
			centre = targetDuv(c.K)
		}
		c.Duv = centre + c.Duv*factor*duvTolerance
		if out[i], err = XYFromCCT(c); err != nil {
			return out, err
		}
	}
	return out, nil
}

// targetDuv is where the later edition centres its quadrangles at a temperature.
func targetDuv(kelvin float64) float64 {
	if kelvin < 2870 {
		return 0
	}
	return 57700/(kelvin*kelvin) - 44.6/kelvin + 0.00854
}

// StepRadius is the radius of a one-step circle in u′, v′ (CIE TN 001:2014).
const StepRadius = 0.0011

// StepsFrom is how many steps p is away from a centre: the distance in u′, v′ over
// 0.0011 (CIE TN 001:2014).
func StepsFrom(centre, p XY) float64 {
	a, b := centre.UV(), p.UV()
	return math.Hypot(a.U-b.U, a.V-b.V) / StepRadius
}
