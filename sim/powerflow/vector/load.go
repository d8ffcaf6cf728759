package vector

// Loads is a list of branches that draw power from values. Each draws, of P + jQ at
// 1 p.u. and at the voltage V across it, the current
//
//	I = conj(S)·V,  Re and Im of S being P·g and Q·h
//	g = C/|V|² + I/|V| + Z  (h alike with the shares of Q)
//
// where the shares of current and impedance contain the nominal voltage. One of
// constant power has C = 1 alone; it is listed apart, for it takes no root.
type Loads struct {
	index []int32 // by branch: offsets of from, and of to where it has one
	// Shape has, by branch, the least |V|² (V²) at which the characteristic holds; of ZIP
	// branches six more: C, I, Z of P and of Q.
	shape    []float64
	n        int
	wide     int
	pair, zi bool
	begins   bool
}

// NewLoads returns a list of branches between two values (pair), or between one and
// ground; with parts of constant current and impedance (zip), or of constant power
// alone.
func NewLoads(pair, zip bool) *Loads { return &Loads{pair: pair, zi: zip} }

// NewFirstLoads returns a list of branches to ground each of which is the first to draw at
// its value: what stood there before does not count.
func NewFirstLoads(zip bool) *Loads { return &Loads{zi: zip, begins: true} }

// Branch appends a branch. to counts in lists of pairs only, zip (C, I, Z of P, then
// of Q) in lists with one. least is the least |V|², V².
func (b *Loads) Branch(from, to int, least float64, zip [6]float64) {
	b.index = append(b.index, int32(from*Stride))
	b.wide = max(b.wide, from+1)
	if b.pair {
		b.index = append(b.index, int32(to*Stride))
		b.wide = max(b.wide, to+1)
	}
	b.shape = append(b.shape, least)
	if b.zi {
		b.shape = append(b.shape, zip[:]...)
	}
	b.n++
}

// Len is the number of branches.
func (b *Loads) Len() int { return b.n }

// Draw takes what the branches draw at voltages v off the currents into the values:
// power holds P as real and Q as imaginary parts, by branch. It returns the lanes in
// which some branch stands below its least voltage.
func (b *Loads) Draw(into, v, power []float64) uint8 {
	if b.n == 0 {
		return 0
	}
	if len(into) < b.wide*Width || len(v) < b.wide*Width || len(power) < b.n*Width {
		panic("vector: branches reach beyond the values")
	}
	f := drawWye
	switch {
	case b.begins && b.zi:
		f = drawWyeZIPFirst
	case b.begins:
		f = drawWyeFirst
	case b.pair && b.zi:
		f = drawPairZIP
	case b.pair:
		f = drawPair
	case b.zi:
		f = drawWyeZIP
	}
	return uint8(f(&into[0], &v[0], &power[0], &b.index[0], &b.shape[0], b.n))
}
