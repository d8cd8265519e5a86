package spatial

// dissolved says which faces of Isolines have joined the face around them.
type dissolved struct {
	into  []int32 // face that each face now belongs to, fully resolved
	label []uint8 // label after joining
	parts int     // faces withheld that were higher than what surrounds them
	holes int     // faces withheld that were lower
}

// in returns the set of faces whose label after joining satisfies ok.
func (d *dissolved) in(ok func(label int) bool) func(face int32) bool {
	return func(face int32) bool { return ok(int(d.label[face])) }
}

// dissolve removes the outer ring of every face in which there may be fewer
// than least events: the face joins the one around it and takes its label. A
// face directly inside that has the same label as the new surroundings (the
// flat top of a part inside a hole that went, say) has lost its border too and
// joins as well. Faces are taken from the deepest outwards, so a face is judged
// with all that joined it, and one pass is enough; faces of one depth do not
// bear on each other. The background stays.
//
// The number compared is the lower bound Count.Min, brought up to date at every
// join: nodes whose cells all lie in the joined faces then count. Cost: faces
// plus, for each join, the border nodes of the face that goes.
func (s *Isolines) dissolve(m *measure, least float64) *dissolved {
	n := len(s.label)
	d := &dissolved{label: make([]uint8, n)}
	copy(d.label, s.label)
	j := newJoiner(m, n)
	d.into = j.into
	if !(least > 1) {
		return d
	}
	inside := make([][]int32, n) // faces directly inside
	for f := 1; f < n; f++ {
		o := s.outer[f-1]
		inside[o] = append(inside[o], int32(f))
	}
	drop := func(f int32) {
		if s.rings[f-1].high {
			d.parts++
		} else {
			d.holes++
		}
	}
	for _, f := range s.byDepth {
		if j.find(f) != f || j.sure[f] >= least {
			continue
		}
		to := s.outer[f-1]
		drop(f)
		j.join(f, to)
		for _, h := range inside[f] {
			if j.find(h) == to {
				continue // went into f before
			}
			if s.label[h] == s.label[to] {
				drop(h)
				j.join(h, to)
				for _, g := range inside[h] {
					if j.find(g) != to {
						inside[to] = append(inside[to], g)
					}
				}
				continue
			}
			inside[to] = append(inside[to], h)
		}
		inside[f] = nil
	}
	for f := range d.into {
		d.into[f] = j.find(int32(f))
	}
	for f := range d.label {
		d.label[f] = s.label[d.into[f]]
	}
	return d
}
