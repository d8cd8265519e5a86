package mvtest_test

import (
	"fmt"

	"drumlin/mv/mvtest"
)

func ExampleTarget() {
	m := mvtest.Target("RING")
	fmt.Printf("%d parts; f at the hole %.4f, on the ring %.4f\n", m.Len(), m.Density([]float64{0, 0}), m.Density([]float64{2, 0}))
	// Output: 12 parts; f at the hole 0.0000, on the ring 0.0887
}

func ExampleP12() {
	fmt.Println(mvtest.P12(2).Len(), mvtest.P12H(2))
	// Output: 12 [0.25 0.1; 0.1 0.16]
}

// A conformance run is one line in an evaluator's own test file:
//
//	mvtest.Conform(t, build, mvtest.Conformance{Rel: 1e-10})
func ExampleConformance() {
	c := mvtest.Conformance{Rel: 1e-10}
	fmt.Println(c.Floor == 0)
	// Output: true
}
