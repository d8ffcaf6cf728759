package conductor

import "testing"

func BenchmarkOverhead(b *testing.B) {
	l := kersting41(b)
	b.ReportAllocs()
	for b.Loop() {
		if _, err := l.Overhead(); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkConcentricNeutral(b *testing.B) {
	l := buried(b, "250 AA CN 15kV 1/3", "1/0 Cu", 0, -4, 0.5, -4, 1, -4, 1.5, -4)
	b.ReportAllocs()
	for b.Loop() {
		if _, err := l.ConcentricNeutral(); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkSymmetrical(b *testing.B) {
	m := must(b)(kersting41(b).Overhead())
	b.ReportAllocs()
	for b.Loop() {
		if _, ok := m.Symmetrical(); !ok {
			b.Fatal("no sequence matrices")
		}
	}
}

func BenchmarkHandbook(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		if cs, _ := Handbook(); len(cs) == 0 {
			b.Fatal("empty")
		}
	}
}
