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

func TestShiftAddsMultiplesOfDirections(t *testing.T) {
	v, d := Make(2), NewDirections(3, 2)
	Put(v, 1, 4, 10+1i)
	d.Set(0, 1, 1+2i)
	d.Set(2, 1, 5i)
	d.Begin()
	d.Use(2, &[Lanes]float64{4: 2})
	d.Use(0, &[Lanes]float64{4: -1, 5: 1})
	d.Shift(v)
	if a, b, c := At(v, 1, 4), At(v, 1, 5), At(v, 0, 4); a != 9+9i || b != 1+2i || c != 0 {
		t.Errorf("%v, %v and %v, want 9+9i, 1+2i and 0", a, b, c)
	}
	d.Begin()
	d.Shift(v)
	if a := At(v, 1, 4); a != 9+9i {
		t.Errorf("without directions in use the value moves to %v", a)
	}
}
