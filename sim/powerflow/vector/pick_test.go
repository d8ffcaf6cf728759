package vector

import "testing"

func TestPickTakesLanesOfBoth(t *testing.T) {
	a, b := Make(3), Make(4)
	for v := range 3 {
		for l := range Lanes {
			Put(a, v, l, complex(float64(100*v+l), 1))
			Put(b, v, l, complex(float64(100*v+l), 2))
		}
	}
	Pick(a, b, &[Lanes]uint64{7, 7, 0, 8, 15, 9, 6, 1})
	for v := range 3 {
		for l, want := range []complex128{7 + 1i, 7 + 1i, 1i, 2i, 7 + 2i, 1 + 2i, 6 + 1i, 1 + 1i} {
			if got := At(a, v, l); got != want+complex(float64(100*v), 0) {
				t.Errorf("value %d, lane %d: %v, want %v", v, l, got, want)
			}
		}
	}
}
