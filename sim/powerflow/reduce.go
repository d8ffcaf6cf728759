package powerflow

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"yearflow/sim/network"
)

// term is one part of a voltage in terms of the independent ones: Coef·x[Col].
// Coef −1 stands for the number one. A Col below zero is a fixed voltage, −1−Col
// in Network.Fixed.
type term struct{ col, coef int32 }

// reduction writes every voltage in terms of the independent ones.
type reduction struct {
	net      *network.Network
	free     int      // independent unknowns
	terms    [][]term // by unknown
	coef     []float64
	clusters []cluster

	at   []float64 // ratios that the coefficients are of
	fail int       // cluster without a unique solution there, or −1
}

// cluster is a set of couplings that share terminals. It gives the voltages of its
// dependent unknowns:
//
//	Cp·V_dep + Cf·V_ind = 0,  V_dep = −Cp⁻¹·Cf·V_ind
type cluster struct {
	couplings []int32
	dep, ind  []int32
	first     int       // of its entries −Cp⁻¹·Cf in coef, row by row
	inverse   []float64 // Cp⁻¹
	cp, cf    []float64
}

func newReduction(n *network.Network) (*reduction, error) {
	r := &reduction{net: n, fail: -1, terms: make([][]term, len(n.Unknowns))}
	fixed := make([]int32, len(n.Unknowns))
	for i := range fixed {
		fixed[i] = -1
	}
	for f, x := range n.Fixed {
		if fixed[x.Unknown] >= 0 {
			return nil, fmt.Errorf("two sources hold the voltage of %s: leave one of them, or give one an impedance (short circuit 3ph [MVA])", n.Unknowns[x.Unknown].Name)
		}
		fixed[x.Unknown] = int32(f)
	}
	dependent := make([]bool, len(n.Unknowns))
	for _, members := range groups(n) {
		c, err := r.cluster(members, fixed)
		if err != nil {
			return nil, err
		}
		for _, u := range c.dep {
			dependent[u] = true
		}
		r.clusters = append(r.clusters, c)
	}
	for u := range n.Unknowns {
		switch {
		case fixed[u] >= 0:
			r.terms[u] = []term{{-1 - fixed[u], -1}}
		case !dependent[u]:
			r.terms[u] = []term{{int32(r.free), -1}}
			r.free++
		}
	}
	for k := range r.clusters {
		c := &r.clusters[k]
		for i, u := range c.dep {
			for j, v := range c.ind {
				if at := c.first + i*len(c.ind) + j; r.coef[at] != 0 {
					r.terms[u] = append(r.terms[u], term{r.terms[v][0].col, int32(at)})
				}
			}
		}
	}
	return r, nil
}

// groups joins couplings that share a terminal, in order of their first members.
func groups(n *network.Network) [][]int32 {
	owner := map[int32]int{}
	parent := make([]int, len(n.Couplings))
	find := func(i int) int {
		for parent[i] != i {
			parent[i] = parent[parent[i]]
			i = parent[i]
		}
		return i
	}
	for k := range n.Couplings {
		parent[k] = k
		for _, t := range n.Couplings[k].Terminals {
			if o, ok := owner[t]; ok {
				a, b := find(o), find(k)
				parent[max(a, b)] = min(a, b)
			} else {
				owner[t] = k
			}
		}
	}
	at := map[int]int{}
	var out [][]int32
	for k := range n.Couplings {
		root := find(k)
		g, ok := at[root]
		if !ok {
			g = len(out)
			at[root] = g
			out = append(out, nil)
		}
		out[g] = append(out[g], int32(k))
	}
	return out
}

// cluster picks the dependent unknowns by elimination at ratios that stand in no
// special relation, so that the choice holds at every tap.
func (r *reduction) cluster(members, fixed []int32) (cluster, error) {
	c := cluster{couplings: members}
	var all []int32
	col := map[int32]int{}
	for _, k := range members {
		for _, t := range r.net.Couplings[k].Terminals {
			if _, ok := col[t]; !ok {
				col[t] = len(all)
				all = append(all, t)
			}
		}
	}
	m, w := len(members), len(all)
	a := make([]float64, m*w)
	for i, k := range members {
		cp := &r.net.Couplings[k]
		ratio := 1.0
		if cp.Unit >= 0 {
			ratio = 1 + 0.1*math.Sin(float64(k)+1)
		}
		for t, u := range cp.Terminals {
			a[i*w+col[u]] += cp.Base[t] + cp.Inverse[t]/ratio
		}
	}
	taken := make([]bool, w)
	for i := range m {
		// The last terminals of a coupling are its load side: they depend, where
		// nothing speaks against it.
		best := -1
		for j := range w {
			if !taken[j] && fixed[all[j]] < 0 && math.Abs(a[i*w+j]) > 0.05 && (best < 0 || math.Abs(a[i*w+j]) >= 0.5*math.Abs(a[i*w+best])) {
				best = j
			}
		}
		if best < 0 {
			return c, r.loopError(members)
		}
		taken[best] = true
		for k := range m {
			if k == i {
				continue
			}
			f := a[k*w+best] / a[i*w+best]
			for j := range w {
				a[k*w+j] -= f * a[i*w+j]
			}
			a[k*w+best] = 0
		}
		c.dep = append(c.dep, all[best])
	}
	for j, u := range all {
		if !taken[j] {
			c.ind = append(c.ind, u)
		}
	}
	c.cp = make([]float64, m*m)
	c.inverse = make([]float64, m*m)
	c.cf = make([]float64, m*len(c.ind))
	c.first = len(r.coef)
	// Entries that vanish at these ratios vanish at all: the mark is kept until the
	// terms have been listed.
	for i := range m {
		for _, u := range c.ind {
			v := -a[i*w+col[u]] / a[i*w+col[c.dep[i]]]
			if math.Abs(v) < 1e-9 {
				v = 0
			}
			r.coef = append(r.coef, v)
		}
	}
	return c, nil
}

func (r *reduction) loopError(members []int32) error {
	var names []string
	seen := map[string]bool{}
	for _, k := range members {
		c := &r.net.Couplings[k]
		name := ""
		if c.Kind == network.Switch {
			name = "switch " + r.net.Model.Switches[c.Index].Name
		} else {
			name = "regulator " + r.net.Model.Regulators[c.Index].Name
		}
		if !seen[name] {
			seen[name] = true
			names = append(names, name)
		}
	}
	return fmt.Errorf("%s: ideal devices in parallel, in a loop or across stiff sources leave the current between them open: give one of the regulators an impedance [%%], open a switch, or replace a switch by a short section", strings.Join(names, ", "))
}

// update computes the coefficients of every cluster at the couplings' ratios. It
// allocates nothing, and returns the cluster that has no unique solution, or −1.
func (r *reduction) update(ratio []float64) int {
	if len(r.clusters) == 0 || len(r.at) > 0 && slices.Equal(r.at, ratio) {
		return r.fail
	}
	r.at = append(r.at[:0], ratio...)
	r.fail = r.compute(ratio)
	return r.fail
}

func (r *reduction) compute(ratio []float64) int {
	for k := range r.clusters {
		c := &r.clusters[k]
		m, f := len(c.dep), len(c.ind)
		clear(c.cp)
		clear(c.cf)
		for i, kk := range c.couplings {
			cp := &r.net.Couplings[kk]
			for t, u := range cp.Terminals {
				v := cp.Base[t] + cp.Inverse[t]/ratio[kk]
				for j, d := range c.dep {
					if d == u {
						c.cp[i*m+j] += v
					}
				}
				for j, d := range c.ind {
					if d == u {
						c.cf[i*f+j] += v
					}
				}
			}
		}
		if !invertReal(c.inverse, c.cp, m) {
			return k
		}
		for i := range m {
			for j := range f {
				s := 0.0
				for l := range m {
					s -= c.inverse[i*m+l] * c.cf[l*f+j]
				}
				r.coef[c.first+i*f+j] = s
			}
		}
	}
	return -1
}

// clone returns a reduction that is updated by itself.
func (r *reduction) clone() reduction {
	out := *r
	out.coef, out.at = slices.Clone(r.coef), slices.Clone(r.at)
	out.clusters = slices.Clone(r.clusters)
	for k := range out.clusters {
		c := &out.clusters[k]
		c.inverse, c.cp, c.cf = slices.Clone(c.inverse), slices.Clone(c.cp), slices.Clone(c.cf)
	}
	return out
}

// value returns the coefficient of a term.
func (r *reduction) value(t term) float64 {
	if t.coef < 0 {
		return 1
	}
	return r.coef[t.coef]
}

// invertReal sets inv to the inverse of the k × k matrix a, which it destroys, by
// Gauss-Jordan elimination with row exchange.
func invertReal(inv, a []float64, k int) bool {
	for i := range inv {
		inv[i] = 0
	}
	for i := range k {
		inv[i*k+i] = 1
	}
	for c := range k {
		best := c
		for r := c + 1; r < k; r++ {
			if math.Abs(a[r*k+c]) > math.Abs(a[best*k+c]) {
				best = r
			}
		}
		if math.Abs(a[best*k+c]) < 1e-12 {
			return false
		}
		if best != c {
			for j := range k {
				a[c*k+j], a[best*k+j] = a[best*k+j], a[c*k+j]
				inv[c*k+j], inv[best*k+j] = inv[best*k+j], inv[c*k+j]
			}
		}
		d := 1 / a[c*k+c]
		for j := range k {
			a[c*k+j] *= d
			inv[c*k+j] *= d
		}
		for r := range k {
			if f := a[r*k+c]; r != c && f != 0 {
				for j := range k {
					a[r*k+j] -= f * a[c*k+j]
					inv[r*k+j] -= f * inv[c*k+j]
				}
			}
		}
	}
	return true
}
