package pipeline

import (
	"fmt"
	"math"

	"drumlin/spatial"
)

// closePairs lists the regions and contours between whose borders there are
// fewer events than a released part must hold, by the estimates of their counts.
// The guard sees to differences within regions and within bands; regions and
// bands are drawn apart, so one can be taken from the other.
func closePairs(rel *spatial.Release) []string {
	least := rel.Withheld().MinEvents
	if !(least > 1) {
		return nil
	}
	var out []string
	var above float64 // events at or above a band's lower edge
	bands := rel.Bands()
	for k := len(bands) - 1; k >= 0; k-- {
		above += bands[k].Events.Estimate
		for _, r := range rel.Regions() {
			if r.ThresholdPerKM2 == bands[k].FromPerKM2 {
				continue // the same line
			}
			if d := math.Abs(r.Events.Estimate - above); d < least {
				out = append(out, fmt.Sprintf("the %g %% region and the contour at %s per km2", 100*r.Content, Significant(bands[k].FromPerKM2)))
			}
		}
	}
	return out
}
