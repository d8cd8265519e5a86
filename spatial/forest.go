package spatial

import (
	"errors"
	"slices"
)

// errForest is a fault of the program: curves that do not nest.
var errForest = errors.New("spatial: isolines do not nest")

// nest finds the face around every ring by walking along the lattice rows from
// the frame: the first time a row meets a ring it comes from outside. Every
// ring goes around a node, so every ring is met. O(vertices).
func (s *Isolines) nest() error {
	s.outer = make([]int32, len(s.rings))
	for r := range s.outer {
		s.outer[r] = -1
	}
	s.label = make([]uint8, len(s.rings)+1)
	s.depth = make([]int32, len(s.rings)+1)
	s.after = make([]int32, len(s.at))
	for j := 1; j <= s.ny; j++ {
		face := int32(0)
		for v := s.hStart[j]; v < s.vStart[j]; v++ {
			r := s.ring[v]
			switch {
			case s.outer[r] < 0:
				i := j*s.stride + int(s.edge[v])
				s.outer[r] = face
				s.depth[r+1] = s.depth[face] + 1
				s.label[r+1] = s.rings[r].level
				if s.class[i] < s.class[i+1] {
					s.rings[r].high = true
					s.label[r+1]++
				}
				face = r + 1
			case face == r+1:
				face = s.outer[r]
			case face == s.outer[r]:
				face = r + 1
			default:
				return errForest
			}
			s.after[v] = face
		}
		if face != 0 {
			return errForest
		}
	}
	s.area = make([]float64, len(s.label))
	s.area[0] = s.Window()
	for r := range s.rings {
		if s.outer[r] < 0 {
			return errForest
		}
		a := s.ringArea(r)
		s.area[r+1] += a
		s.area[s.outer[r]] -= a
	}
	s.byDepth = make([]int32, len(s.rings))
	for r := range s.byDepth {
		s.byDepth[r] = int32(r + 1)
	}
	slices.SortStableFunc(s.byDepth, func(a, b int32) int { return int(s.depth[b] - s.depth[a]) })
	return nil
}

// crossed returns the face on the other side of the ring of vertex v.
func (s *Isolines) crossed(face, v int32) int32 {
	if r := s.ring[v]; face == r+1 {
		return s.outer[r]
	}
	return s.ring[v] + 1
}

// faceLeft returns the face of the node left of the edge whose first vertex is
// v, in framed row j.
func (s *Isolines) faceLeft(j int, v int32) int32 {
	if v == s.hStart[j] {
		return 0
	}
	return s.after[v-1]
}

// eachRun calls f for the stretches [lo, hi) of nodes of lattice row j (without
// the frame) that lie in one face.
func (s *Isolines) eachRun(j int, f func(lo, hi int, face int32)) {
	face, lo := int32(0), 0
	for v := s.hStart[j+1]; v < s.vStart[j+1]; v++ {
		to := s.after[v]
		if v+1 < s.vStart[j+1] && s.edge[v+1] == s.edge[v] {
			continue // more crossings before the next node
		}
		if hi := int(s.edge[v]); hi > lo { // framed edge i ends at node i of the lattice row
			f(lo, min(hi, s.nx), face)
			lo = hi
		}
		face = to
	}
	if lo < s.nx {
		f(lo, s.nx, face)
	}
}

// Faces returns the number of faces, background included.
func (s *Isolines) Faces() int { return len(s.label) }

// Label returns the number of levels at or below the values in a face.
func (s *Isolines) Label(face int) int { return int(s.label[face]) }

// Around returns the face around a face, and -1 for the background.
func (s *Isolines) Around(face int) int {
	if face == 0 {
		return -1
	}
	return int(s.outer[face-1])
}

// Area returns the area of a face net of the faces inside it, square metres.
func (s *Isolines) Area(face int) float64 { return s.area[face] }

// NodeFaces returns the face of every lattice node, axis 0 fastest.
func (s *Isolines) NodeFaces() []int32 {
	out := make([]int32, s.nx*s.ny)
	for j := range s.ny {
		s.eachRun(j, func(lo, hi int, face int32) {
			row := out[j*s.nx:]
			for i := lo; i < hi; i++ {
				row[i] = face
			}
		})
	}
	return out
}
