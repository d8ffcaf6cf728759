package conductor

import "testing"

func handbookConductor(t testing.TB, name string) Conductor {
	t.Helper()
	cs, _ := Handbook()
	for _, c := range cs {
		if c.Name == name {
			return c
		}
	}
	t.Fatalf("no conductor %q in the handbook", name)
	return Conductor{}
}

func handbookCable(t testing.TB, name string) Cable {
	t.Helper()
	_, ks := Handbook()
	for _, k := range ks {
		if k.Name == name {
			return k
		}
	}
	t.Fatalf("no cable %q in the handbook", name)
	return Cable{}
}

// ft returns places given in feet.
func ft(xy ...float64) []Point {
	ps := make([]Point, 0, len(xy)/2)
	for i := 0; i < len(xy); i += 2 {
		ps = append(ps, Point{xy[i] * foot, xy[i+1] * foot})
	}
	return ps
}

// pole returns an overhead line at 60 Hz and 100 ohm m; places in feet, the
// neutral's last (blank conductor: none).
func pole(t testing.TB, phase, neutral string, xy ...float64) Line {
	t.Helper()
	ps := ft(xy...)
	l := Line{Frequency: 60, EarthResistivity: 100, PhaseConductor: handbookConductor(t, phase)}
	if neutral != "" {
		l.Neutral, l.NeutralConductor = &ps[len(ps)-1], handbookConductor(t, neutral)
		ps = ps[:len(ps)-1]
	}
	l.Phase = ps
	return l
}

// buried returns a cable line at 60 Hz and 100 ohm m, as pole does.
func buried(t testing.TB, cable, neutral string, xy ...float64) CableLine {
	t.Helper()
	k := handbookCable(t, cable)
	ps := ft(xy...)
	l := CableLine{Frequency: 60, EarthResistivity: 100, Cable: k, Core: handbookConductor(t, k.Conductor)}
	if k.Strands > 0 {
		l.Strand = handbookConductor(t, k.Strand)
	}
	if neutral != "" {
		l.Neutral, l.NeutralConductor = &ps[len(ps)-1], handbookConductor(t, neutral)
		ps = ps[:len(ps)-1]
	}
	l.Phase = ps
	return l
}

func must(t testing.TB) func(Matrices, error) Matrices {
	return func(m Matrices, err error) Matrices {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return m
	}
}
