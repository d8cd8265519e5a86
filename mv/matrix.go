package mv

import (
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/mat"
)

// BandwidthMatrix is a symmetric positive definite d by d matrix H in squared
// data units (for a map: square metres). The Gaussian kernel with bandwidth
// matrix H is the normal density with covariance H; for a scalar scale h,
// H = h*h*I. The zero value has dimension 0 and is not usable. Values are
// immutable and safe to share.
type BandwidthMatrix struct {
	d      int
	h      []float64 // row-major, symmetric
	lower  []float64 // Cholesky factor L, row-major lower triangle, H = L*L'
	inv    []float64 // H inverse, row-major
	logDet float64
}

// NewBandwidthMatrix returns the matrix with the d*d row-major entries of h,
// which are copied. The two triangles are averaged when they differ by less
// than 1e-9 of the larger diagonal entry; a larger difference is ErrShape, a
// matrix without a Cholesky factor is ErrNotPositiveDefinite.
func NewBandwidthMatrix(d int, h []float64) (BandwidthMatrix, error) {
	if d < 1 || len(h) != d*d {
		return BandwidthMatrix{}, fmt.Errorf("mv: bandwidth matrix: %d entries for dimension %d: %w", len(h), d, ErrShape)
	}
	var top float64
	for i := range d {
		top = max(top, math.Abs(h[i*d+i]))
	}
	m := BandwidthMatrix{d: d, h: make([]float64, d*d)}
	for i := range d {
		for j := range d {
			v, w := h[i*d+j], h[j*d+i]
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return BandwidthMatrix{}, fmt.Errorf("mv: bandwidth matrix: entry (%d,%d) is %g: %w", i+1, j+1, v, ErrNotFinite)
			}
			if math.Abs(v-w) > 1e-9*top {
				return BandwidthMatrix{}, fmt.Errorf("mv: bandwidth matrix: entries (%d,%d)=%g and (%d,%d)=%g differ: %w", i+1, j+1, v, j+1, i+1, w, ErrShape)
			}
			m.h[i*d+j] = (v + w) / 2
		}
	}
	var chol mat.Cholesky
	if ok := chol.Factorize(mat.NewSymDense(d, append([]float64(nil), m.h...))); !ok {
		return BandwidthMatrix{}, fmt.Errorf("mv: bandwidth matrix %s: %w", formatSquare(d, m.h), ErrNotPositiveDefinite)
	}
	var l mat.TriDense
	chol.LTo(&l)
	var inv mat.SymDense
	if err := chol.InverseTo(&inv); err != nil {
		return BandwidthMatrix{}, fmt.Errorf("mv: bandwidth matrix %s is singular to working precision (%w): %w", formatSquare(d, m.h), err, ErrNotPositiveDefinite)
	}
	m.lower, m.inv = make([]float64, d*d), make([]float64, d*d)
	for i := range d {
		for j := range d {
			m.inv[i*d+j] = inv.At(i, j)
			if j <= i {
				m.lower[i*d+j] = l.At(i, j)
			}
		}
	}
	m.logDet = chol.LogDet()
	return m, nil
}

// ScalarBandwidth returns h*h*I in d dimensions, h in data units.
func ScalarBandwidth(d int, h float64) (BandwidthMatrix, error) {
	diag := make([]float64, d)
	for i := range diag {
		diag[i] = h * h
	}
	return DiagonalBandwidth(diag)
}

// DiagonalBandwidth returns the matrix with the given diagonal, squared units.
func DiagonalBandwidth(diag []float64) (BandwidthMatrix, error) {
	d := len(diag)
	h := make([]float64, d*d)
	for i, v := range diag {
		h[i*d+i] = v
	}
	return NewBandwidthMatrix(d, h)
}

// Dim returns d.
func (m BandwidthMatrix) Dim() int { return m.d }

// At returns entry (i, j), counted from 0.
func (m BandwidthMatrix) At(i, j int) float64 { return m.h[i*m.d+j] }

// InvAt returns entry (i, j) of the inverse.
func (m BandwidthMatrix) InvAt(i, j int) float64 { return m.inv[i*m.d+j] }

// LowerAt returns entry (i, j) of the Cholesky factor L, H = L*L'.
func (m BandwidthMatrix) LowerAt(i, j int) float64 { return m.lower[i*m.d+j] }

// Entries returns a row-major copy of H.
func (m BandwidthMatrix) Entries() []float64 { return append([]float64(nil), m.h...) }

// LogDet returns the logarithm of the determinant of H.
func (m BandwidthMatrix) LogDet() float64 { return m.logDet }

// SqrtDet returns the square root of the determinant, in data units to the power d.
func (m BandwidthMatrix) SqrtDet() float64 { return math.Exp(m.logDet / 2) }

// Scaled returns c*H for c > 0.
func (m BandwidthMatrix) Scaled(c float64) (BandwidthMatrix, error) {
	h := m.Entries()
	for i := range h {
		h[i] *= c
	}
	return NewBandwidthMatrix(m.d, h)
}

// Mahalanobis2 returns x' * inverse(H) * x for x of length d.
func (m BandwidthMatrix) Mahalanobis2(x []float64) float64 {
	var q float64
	for i := range m.d {
		var s float64
		for j := range m.d {
			s += m.inv[i*m.d+j] * x[j]
		}
		q += x[i] * s
	}
	return q
}

// Quad returns t' * H * t for t of length d.
func (m BandwidthMatrix) Quad(t []float64) float64 {
	var q float64
	for i := range m.d {
		var s float64
		for j := range m.d {
			s += m.h[i*m.d+j] * t[j]
		}
		q += t[i] * s
	}
	return q
}

// Eigenvalues returns the eigenvalues of H in descending order: the squared
// scales along its principal axes.
func (m BandwidthMatrix) Eigenvalues() []float64 {
	var e mat.EigenSym
	if !e.Factorize(mat.NewSymDense(m.d, m.Entries()), false) {
		panic("mv: eigenvalues of a positive definite matrix did not converge")
	}
	v := e.Values(nil)
	for i, j := 0, len(v)-1; i < j; i, j = i+1, j-1 {
		v[i], v[j] = v[j], v[i]
	}
	return v
}

// Ellipse is the shape of a bandwidth matrix in the plane.
type Ellipse struct {
	Major, Minor float64 // scales (standard deviations of the Gaussian kernel), data units
	Bearing      float64 // degrees clockwise from axis 1 (north) to the major axis, in [0, 180)
}

// Ellipse returns the principal scales and the bearing of the major axis. It
// panics unless d is 2. A multiple of the identity has bearing 0.
func (m BandwidthMatrix) Ellipse() Ellipse {
	if m.d != 2 {
		panic("mv: Ellipse needs a bandwidth matrix of dimension 2")
	}
	a, b, c := m.h[0], m.h[1], m.h[3]
	mid, half := (a+c)/2, math.Hypot((a-c)/2, b)
	major := mid + half
	minor := math.Exp(m.logDet) / major
	e := Ellipse{Major: math.Sqrt(major), Minor: math.Sqrt(minor)}
	if half > 1e-12*mid {
		angle := 0.5 * math.Atan2(2*b, a-c) // anticlockwise from axis 0
		e.Bearing = math.Mod(450-angle*180/math.Pi, 180)
	}
	return e
}

// String prints the rows of H, decimal.
func (m BandwidthMatrix) String() string { return formatSquare(m.d, m.h) }

func formatSquare(d int, h []float64) string {
	var b strings.Builder
	b.WriteByte('[')
	for i := range d {
		if i > 0 {
			b.WriteString("; ")
		}
		for j := range d {
			if j > 0 {
				b.WriteByte(' ')
			}
			fmt.Fprintf(&b, "%.9g", h[i*d+j])
		}
	}
	b.WriteByte(']')
	return b.String()
}
