package network

import (
	"math"

	"yearflow/sim/feeder"
)

// midTapped stamps a transformer whose low winding has a grounded middle: a
// centre-tapped service transformer, or the lighting unit of a four-wire delta. Its
// impedance is split as that of an interlaced winding,
//
//	primary Z0 = 0.5·R + j0.8·X,  each half Z1 = Z2 = R + j0.4·X
//
// p.u. of the full winding on its rating (L. W. Hopkinson, Approximate distribution
// transformer impedances, 1976, as quoted by W. H. Kersting, Center-tapped
// transformer and 120/240-V secondary models, IEEE Trans. Industry Applications,
// 2009). With n the ratio of the primary to half the secondary, the three branches
// meet at the inner voltage e behind Z0:
//
//	W = (V_p/n, V_1, −V_2),  e = Σ y·W / Σ y,  I = y·(W − e)
func (n *Network) midTapped(i int) {
	t := &n.Model.Transformers[i]
	hi, lo := n.At[t.From], n.At[t.To]
	half := t.LowKV * 1000 / 2
	ratio := t.TapKV * 1000 / half
	base := half * half / (t.KVA * 1000)
	y := [3]complex128{
		1 / (complex(0.5*t.R, 0.8*t.X) * complex(base, 0)),
		1 / (complex(t.R, 0.4*t.X) * complex(base, 0)),
		1 / (complex(t.R, 0.4*t.X) * complex(base, 0)),
	}
	sum := y[0] + y[1] + y[2]
	var w [3][3]complex128
	for a := range w {
		for b := range w {
			w[a][b] = -y[a] * y[b] / sum
		}
		w[a][a] += y[a]
	}
	var term []int32
	for _, p := range t.Phases {
		term = append(term, hi[p])
	}
	from := len(term)
	for _, p := range n.Model.Nodes[t.To].Phases {
		term = append(term, lo[p])
	}
	k := len(term)
	// incidence holds the rows of W = N·V.
	incidence := make([][]float64, 3)
	for a := range incidence {
		incidence[a] = make([]float64, k)
	}
	at := func(u int32) int {
		for x, v := range term {
			if v == u {
				return x
			}
		}
		return -1
	}
	incidence[0][at(hi[t.HighEnds[0]])] = 1 / ratio
	if len(t.HighEnds) == 2 {
		incidence[0][at(hi[t.HighEnds[1]])] = -1 / ratio
	}
	incidence[1][at(lo[t.LowEnds[0]])] = 1
	incidence[2][at(lo[t.LowEnds[1]])] = -1
	full := make([]complex128, k*k)
	for a := range w {
		for b := range w {
			for p := range k {
				for q := range k {
					if c := incidence[a][p] * incidence[b][q]; c != 0 {
						full[p*k+q] += w[a][b] * complex(c, 0)
					}
				}
			}
		}
	}
	n.element(Element{Transformer, i, term, from, k - from, full})
	if t.NoLoadLoss != 0 || t.Exciting != 0 {
		n.element(Element{TransformerNoLoad, i, term, from, k - from, core(t, incidence[0], ratio, k)})
	}
}

// core is the admittance of the no-load loss and the exciting current across the
// high winding, whose voltage is ratio times the first row of the incidence.
func core(t *feeder.Transformer, primary []float64, ratio float64, k int) []complex128 {
	v := t.HighKV * 1000
	g := t.NoLoadLoss / (v * v)
	a := t.Exciting * t.KVA * 1000 / (v * v)
	y := complex(g, -math.Sqrt(math.Max(0, a*a-g*g)))
	out := make([]complex128, k*k)
	for p := range k {
		for q := range k {
			out[p*k+q] = y * complex(primary[p]*primary[q]*ratio*ratio, 0)
		}
	}
	return out
}
