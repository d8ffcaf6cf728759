package plots

import "testing"

// BenchmarkDemoYear draws all figures of 8,760 steps on about 230 node.phases with
// all logs, reading included.
func BenchmarkDemoYear(b *testing.B) {
	dir := year().write()
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Draw(dir, kept{}.out, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkEach(b *testing.B) {
	dir := year().write()
	for _, name := range Names() {
		b.Run(name, func(b *testing.B) {
			f := mustRead(b, dir)
			s, err := newSurvey(f)
			if err != nil {
				b.Fatal(err)
			}
			st := newStyle(200)
			d, err := choose([]string{name})
			if err != nil {
				b.Fatal(err)
			}
			for b.Loop() {
				p, _ := d[0].paint(s, st)
				if err := p.writeTo(&discard{}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

type discard struct{}

func (*discard) Write(b []byte) (int, error) { return len(b), nil }

func BenchmarkRead(b *testing.B) {
	dir := year().write()
	for b.Loop() {
		if _, err := newSurvey(mustRead(b, dir)); err != nil {
			b.Fatal(err)
		}
	}
}
