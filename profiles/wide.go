package profiles

import "math"

// wide is a sum in twice the working precision, hi + lo.
type wide struct{ hi, lo float64 }

// add adds v by the error-free sum of D. E. Knuth (The Art of Computer Programming,
// volume 2, section 4.2.2, theorem B).
func (a *wide) add(v float64) {
	s := a.hi + v
	b := s - a.hi
	a.lo += (a.hi - (s - b)) + (v - b)
	a.hi = s
}

// addProduct adds w·v, with the rounding error of the product.
func (a *wide) addProduct(w, v float64) {
	p := w * v
	a.add(p)
	a.lo += math.FMA(w, v, -p)
}

// addScaled adds w·b.
func (a *wide) addScaled(w float64, b wide) {
	a.addProduct(w, b.hi)
	a.lo += w * b.lo
}

// over returns the sum divided by w, rounded once.
func (a wide) over(w float64) float64 {
	q := a.hi / w
	r := math.FMA(-q, w, a.hi) + a.lo
	return q + r/w
}

// blockLength is the number of values of a block of prefix sums.
const blockLength = 64

// blockSums returns the sums of the first 0, 1, 2, ... blocks.
func blockSums(values []float64) []wide {
	sums := make([]wide, 1, len(values)/blockLength+1)
	var s wide
	for i, v := range values {
		s.add(v)
		if (i+1)%blockLength == 0 {
			sums = append(sums, s)
		}
	}
	return sums
}

// sum returns the sum of values[a:b]. Its cost does not grow with b − a. How it is
// summed depends on a and b alone, so that the same question has the same answer.
func (s *Series) sum(a, b int) wide {
	var t wide
	if b-a < 2*blockLength {
		for _, v := range s.values[a:b] {
			t.add(v)
		}
		return t
	}
	sums := s.sums()
	p, q := (a+blockLength-1)/blockLength, b/blockLength
	for _, v := range s.values[a : p*blockLength] {
		t.add(v)
	}
	t.add(sums[q].hi)
	t.add(-sums[p].hi)
	t.lo += sums[q].lo - sums[p].lo
	for _, v := range s.values[q*blockLength : b] {
		t.add(v)
	}
	return t
}
