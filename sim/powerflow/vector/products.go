package vector

// Products is a program on values, worked off row by row, such as the factoring of a
// matrix that differs from lane to lane:
//
//	x_target = ±(x_init ± Σ x_a·x_b), or one over that
//
// What a row reads may be what rows before it set.
type Products struct {
	index []int32 // by row: kind, offsets of target and init (below zero: none), pairs, their offsets
	rows  int
	far   int
}

// Kind is how a row of Products ends; kinds are combined by or.
type Kind int32

// Without Plus the sum is taken off. Negated turns the sign of all, and Reciprocal takes one
// over it, last.
const (
	Minus   Kind = 0
	Plus    Kind = 1
	Negated Kind = 2
	Inverse Kind = 4
)

// NoInit is an init of zero.
const NoInit = -1

// Row appends a row.
func (p *Products) Row(kind Kind, target, init int, pairs ...[2]int) {
	p.index = append(p.index, int32(kind), int32(target*Stride), int32(max(init, -1)*Stride), int32(len(pairs)))
	p.far = max(p.far, target+1, init+1)
	for _, x := range pairs {
		p.index = append(p.index, int32(x[0]*Stride), int32(x[1]*Stride))
		p.far = max(p.far, x[0]+1, x[1]+1)
	}
	p.rows++
}

// Len is the number of rows.
func (p *Products) Len() int { return p.rows }

// Run works the rows off.
func (p *Products) Run(x []float64) {
	if len(x) < p.far*Width {
		panic("vector: products reach beyond the values")
	}
	if p.rows > 0 {
		products(&x[0], &p.index[0], p.rows)
	}
}
