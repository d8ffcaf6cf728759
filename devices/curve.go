package devices

import "math"

// sloped is a quantity that depends on voltage: its value at one voltage, and its
// derivative there towards higher voltage. Corners of curves and limits make the two
// one-sided derivatives differ; everything here keeps to the one on the right.
type sloped struct{ at, slope float64 }

// constant returns a quantity that does not depend on voltage.
func constant(x float64) sloped { return sloped{at: x} }

func (a sloped) times(k float64) sloped { return sloped{k * a.at, k * a.slope} }

// lesser and greater return the minimum and the maximum of two quantities; where they
// meet, the derivative is that of whichever comes next to the right.
func lesser(a, b sloped) sloped {
	if b.at < a.at || b.at == a.at && b.slope < a.slope {
		return b
	}
	return a
}

func greater(a, b sloped) sloped {
	if b.at > a.at || b.at == a.at && b.slope > a.slope {
		return b
	}
	return a
}

// clamp returns q between −below and above, both not negative.
func clamp(q, below, above sloped) sloped {
	return greater(lesser(q, above), below.times(-1))
}

// arc returns what a circle of radius r leaves beside x,
//
//	√(r² − x²),   0 outside the circle
//
// At x = r it stands upright; the derivative is given as 0 there.
func arc(r float64, x sloped) sloped {
	square := (r - x.at) * (r + x.at)
	if !(square > 0) {
		return sloped{}
	}
	root := math.Sqrt(square)
	return sloped{root, -x.at * x.slope / root}
}

// through returns the value at a of the straight lines through the points (x, y), flat
// outside them. The x must not fall; points with the same x must have the same y. A
// point has its y exactly.
func through(x, y []float64, a sloped) sloped {
	i := 0
	for i < len(x) && (x[i] < a.at || x[i] == a.at && a.slope >= 0) {
		i++
	}
	switch i {
	case 0:
		return constant(y[0])
	case len(x):
		return constant(y[len(x)-1])
	}
	k := (y[i] - y[i-1]) / (x[i] - x[i-1])
	return sloped{y[i-1] + k*(a.at-x[i-1]), k * a.slope}
}
