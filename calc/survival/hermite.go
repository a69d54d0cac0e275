package survival

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/integrate/quad"
)

// hermite15 are the nodes and weights of 15-point Gauss and Hermite quadrature for the standard normal distribution, whose
// weight is exp(-x*x/2) over sqrt(2 pi) where the library's is exp(-x*x).
var hermite15 = sync.OnceValues(func() (x, w []float64) {
	x, w = make([]float64, 15), make([]float64, 15)
	quad.Hermite{}.FixedLocations(x, w, math.Inf(-1), math.Inf(1))
	for i := range x {
		x[i] *= math.Sqrt2
		w[i] /= math.Sqrt(math.Pi)
	}
	return x, w
})
