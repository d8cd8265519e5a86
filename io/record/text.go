package record

import "strconv"

// HexFloats returns the values as exact hexadecimal floating point, the form
// strconv.ParseFloat and C's strtod read back to the same bits.
func HexFloats(v []float64) []string {
	s := make([]string, len(v))
	for i, x := range v {
		s[i] = strconv.FormatFloat(x, 'x', -1, 64)
	}
	return s
}

// RegionRuleText says in a sentence how region borders were found; "" for a
// rule that is not known.
func RegionRuleText(rule string) string {
	switch rule {
	case "events":
		return "the border of the region with content c is the density that the share c of the mapped events reaches or passes, each event's own kernel left out of the density at its place"
	case "mass":
		return "the border of the region with content c is the density above which the estimate itself holds the probability c"
	}
	return ""
}

// Caution is the one sentence that travels inside every map file.
const Caution = "A smoothed estimate from recorded events: no statement about any person, household or address, and not a finding by itself."

// Cautions returns the sentences every bundle carries, in a fixed order. They
// are for the reader of the map; warnings about one run are kept apart.
func Cautions() []string {
	return []string{
		"Small numbers identify people: parts resting on fewer events than min_events were withheld, yet a smoothed outline around few places, or two maps that differ by few events, can still point at someone. Masking is weak protection of a place.",
		"The map shows recorded events. Reporting, detection, access and geocoding differ by place and by group, and so will the map, whatever happened on the ground.",
		"Where a map steers attention, later records will tend to confirm it. Compare with a source that the map did not steer before drawing it again.",
		"The surface is smooth because the method makes it so. It says nothing about a household, an address or a person inside a region, and the average of an area does not describe those in it.",
		"The regions and peaks are those of the estimate: another bandwidth, period or extract gives others. Read them together with the bandwidth, the errors and the row account in this record.",
		"High intensity is not high risk: it follows where people, roads or observers are. Risk needs a denominator.",
		"Straight-line smoothing crosses walls, rivers and coasts, and runs off road or pipe networks; do not rank segments or frontages by it.",
		"This is an aid for screening. Local codes and standards, data-protection law, data-sharing agreements, ethics approval and the judgement of the licensed or responsible practitioner come before it. No decision about a person should rest on it alone.",
	}
}
