package bandwidth

import (
	"fmt"
	"strings"
)

// Methods returns the names of the selectors that Select knows.
func Methods() []string {
	return []string{"auto", "plug-in", "scv", "lscv", "bcv", "likelihood-cv", "normal-reference"}
}

// Select runs the selector with the given name. likelihood-cv needs e.Sample.
func Select(e Events, method string, opt Options) (Choice, error) {
	switch method {
	case "auto":
		return Auto(e, opt)
	case "plug-in":
		return PlugInBy(e, opt)
	case "scv":
		return SmoothedCV(e, opt)
	case "lscv":
		return LeastSquaresCV(e, opt)
	case "bcv":
		return BiasedCV(e, opt)
	case "likelihood-cv":
		return LikelihoodCrossValidation(e, opt)
	case "normal-reference":
		return NormalReference(e, opt.Shape)
	}
	return Choice{}, fmt.Errorf("bandwidth: selector %q is none of %s", method, strings.Join(Methods(), ", "))
}
