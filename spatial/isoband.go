package spatial

import "slices"

// Superlevel returns where the function is at or above level k (0 for the
// lowest): polygons with holes, exterior rings anticlockwise.
func (s *Isolines) Superlevel(k int) MultiPolygon {
	return s.polygons(s.outline(func(face int32) bool { return int(s.label[face]) > k }))
}

// Isoband returns where exactly k levels lie at or below the function: k = 1 is
// the band above the lowest level, k = len(Levels()) the highest. The border
// between two bands holds the same vertices in both.
func (s *Isolines) Isoband(k int) MultiPolygon {
	return s.polygons(s.outline(func(face int32) bool { return int(s.label[face]) == k }))
}

// outline is a set of polygons as ring numbers: the exterior first, then holes.
type outline [][]int32

// outline returns the border of the union of the faces in the set. Exterior
// rings are in the order of their first vertex, so are the holes of each.
func (s *Isolines) outline(in func(face int32) bool) outline {
	var out outline
	slot := make(map[int32]int)
	for r := range s.rings { // an exterior may come after its hole only by number: two passes
		if in(int32(r+1)) && !in(s.outer[r]) {
			slot[int32(r)] = len(out)
			out = append(out, []int32{int32(r)})
		}
	}
	for r := range s.rings {
		if in(int32(r+1)) || !in(s.outer[r]) {
			continue
		}
		around := s.outer[r] - 1 // the ring around the hole; it belongs to the set, so does its exterior
		for around >= 0 && in(s.outer[around]) {
			around = s.outer[around] - 1
		}
		if n, ok := slot[around]; ok {
			out[n] = append(out[n], int32(r))
		}
	}
	return out
}

// polygons turns ring numbers into vertices.
func (s *Isolines) polygons(o outline) MultiPolygon {
	out := make(MultiPolygon, len(o))
	for n, rings := range o {
		out[n] = make(Polygon, len(rings))
		for m, r := range rings {
			out[n][m] = s.ringXY(int(r), m == 0)
		}
	}
	return out
}

// used returns the ring numbers of several outlines, rising, each once.
func used(all ...outline) []int32 {
	var out []int32
	for _, o := range all {
		for _, rings := range o {
			out = append(out, rings...)
		}
	}
	slices.Sort(out)
	return slices.Compact(out)
}
