package results

import (
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
	"time"
)

func TestFigures(t *testing.T) {
	for _, c := range []struct {
		x    float64
		want string
	}{
		{0, "0.0000"},
		{math.Copysign(0, -1), "0.0000"},
		{1234.56789, "1234.5679"},
		{-10, "-10.0000"},
		{9.9999999, "10.00000"}, // five decimals, since the value itself is below ten
		{0.5, "0.500000"},
		{0.00123456789, "0.00123457"},
		{-1e-15, "0.0000"},
		{math.NaN(), ""},
		{1e300, strconv.FormatFloat(1e300, 'f', 4, 64)},
		{math.Inf(1), "+Inf"},
	} {
		if got := string(appendFigure(nil, c.x)); got != c.want {
			t.Errorf("figure %g reads %q, want %q", c.x, got, c.want)
		}
	}
}

// A figure has at least four decimals and six significant digits, and lies within
// half a unit of its last digit of the value.
func TestFiguresHaveTheirDigits(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	for range 200_000 {
		x := math.Pow(10, 16*r.Float64()-9) * (2*r.Float64() - 1)
		if math.Abs(x) < 1e-12 {
			continue // written as zero
		}
		text := string(appendFigure(nil, x))
		point := strings.IndexByte(text, '.')
		decimals := len(text) - point - 1
		significant := len(strings.TrimLeft(strings.ReplaceAll(strings.TrimPrefix(text, "-"), ".", ""), "0"))
		if point < 0 || decimals < 4 || significant < 6 {
			t.Fatalf("%g reads %q: %d decimals, %d digits", x, text, decimals, significant)
		}
		got, err := strconv.ParseFloat(text, 64)
		if err != nil || math.Abs(got-x) > 0.5000001*math.Pow(10, -float64(decimals))+1e-15*math.Abs(x) {
			t.Fatalf("%g reads %q (%v)", x, text, err)
		}
		if pu := string(appendPU(nil, x)); len(pu)-strings.IndexByte(pu, '.') != 7 {
			t.Fatalf("%g p.u. reads %q, want six decimals", x, pu)
		}
	}
}

func TestFixedAgreesWithTheStandardLibrary(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 1))
	for range 200_000 {
		x := (2*r.Float64() - 1) * 1e4
		for _, d := range [...]int{0, 4, 6} {
			got, want := string(appendFixed(nil, x, d)), strconv.FormatFloat(x, 'f', d, 64)
			if got == want || want == "-0" {
				continue
			}
			// The product with a power of ten rounds once; only a value within that
			// rounding of half a unit may fall to the other side.
			if off := math.Abs(x)*powersOfTen[d] - math.Floor(math.Abs(x)*powersOfTen[d]); math.Abs(off-0.5) > 1e-6 {
				t.Fatalf("%g with %d decimals: %q, want %q", x, d, got, want)
			}
		}
	}
}

// digitByDigit is appendFixed without any haste.
func digitByDigit(x float64, decimals int) string {
	scaled := math.Round(math.Abs(x) * powersOfTen[decimals])
	if !(scaled < 1<<53) {
		return strconv.FormatFloat(x, 'f', decimals, 64)
	}
	text := strconv.FormatUint(uint64(scaled), 10)
	for len(text) <= decimals {
		text = "0" + text
	}
	if decimals > 0 {
		text = text[:len(text)-decimals] + "." + text[len(text)-decimals:]
	}
	if x < 0 && scaled != 0 {
		text = "-" + text
	}
	return text
}

func TestFixedIsDigitByDigit(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 1))
	values := []float64{0, math.Copysign(0, -1), 0.49999999999999994, 0.5, 1.5, 2.5, 0.9999995, 0.99999949999, 9.999998, 9.9999985, 9.999999, 9.9999995, 10, -1,
		5e-7, 4.9999999999999e-7, 1 << 53, 1<<53 - 1, 1<<52 + 0.5, 1<<52 - 0.5, (1<<53 - 0.5) / 1e6, math.Inf(-1), 99, 100, 99.5, 9, 1e18}
	for range 300_000 {
		x := math.Pow(10, 40*r.Float64()-22) * (2*r.Float64() - 1)
		values = append(values, x, math.Trunc(x*1e6)/1e6, math.Trunc(x*2e6)/2e6, 0.9+0.2*r.Float64())
	}
	for k, x := range values {
		d := k % len(powersOfTen)
		if k < 100 {
			for d := range powersOfTen {
				if got, want := string(appendFixed(nil, x, d)), digitByDigit(x, d); got != want {
					t.Fatalf("%v with %d decimals: %q, want %q", x, d, got, want)
				}
			}
		}
		if got, want := string(appendFixed(nil, x, d)), digitByDigit(x, d); got != want {
			t.Fatalf("%v with %d decimals: %q, want %q", x, d, got, want)
		}
		if got, want := string(appendPU(nil, x)), digitByDigit(x, 6); got != want {
			t.Fatalf("%v p.u.: %q, want %q", x, got, want)
		}
	}
}

func BenchmarkFigures(b *testing.B) {
	buf := make([]byte, 0, 64)
	x := 0.95
	b.Run("pu", func(b *testing.B) {
		for b.Loop() {
			buf = appendPU(buf[:0], x)
			x = math.Abs(x-1.0123) + 0.4567
		}
	})
	b.Run("figure", func(b *testing.B) {
		for b.Loop() {
			buf = appendFigure(buf[:0], 1000*x)
			x = math.Abs(x-1.0123) + 0.4567
		}
	})
}

func TestTrimmed(t *testing.T) {
	for x, want := range map[float64]string{30: "30", 0: "0", 45.5: "45.5", 30.000000001: "30.000000001", 0.1 + 0.2: "0.3", 12.47: "12.47", 1200: "1200"} {
		if got := string(appendTrimmed(nil, x)); got != want {
			t.Errorf("%g reads %q, want %q", x, got, want)
		}
	}
}

func TestNamesAreQuotedWhereCSVWantsIt(t *testing.T) {
	for s, want := range map[string]string{"plain 7": "plain 7", "a,b": `"a,b"`, `12" main`: `"12"" main"`, " led": `" led"`} {
		if got := string(appendText(nil, s)); got != want {
			t.Errorf("%q reads %s, want %s", s, got, want)
		}
	}
}

func TestTimesAgreeWithTheStandardLibrary(t *testing.T) {
	const layout = "2006-01-02T15:04:05.999999999-07:00"
	for _, name := range []string{"UTC", "America/Denver", "Australia/Lord_Howe", "Asia/Kathmandu", "Pacific/Apia"} {
		zone, err := time.LoadLocation(name)
		if err != nil {
			t.Skip("this machine has no zone database:", err)
		}
		c := newZoneClock(zone)
		// Every 13 min 7 s and a bit over 17 months, and backwards: both changes of the
		// clock, month and year ends, and half-hour changes.
		start := time.Date(2024, 12, 1, 0, 0, 0, 5, time.UTC).UnixNano()
		for k := range int64(60_000) {
			for _, ns := range [...]int64{start + k*787*second + k%3*1000, start - k*3*hour} {
				at := time.Unix(0, ns).In(zone)
				if got, want := c.text(ns), at.Format(layout); got != want {
					t.Fatalf("%s: %s, want %s", name, got, want)
				}
				if got, want := string(appendDay(nil, c.dayOf(ns))), at.Format("2006-01-02"); got != want {
					t.Fatalf("%s: day %s, want %s", name, got, want)
				}
				if got, want := string(appendMonth(nil, c.monthOf(ns))), at.Format("2006-01"); got != want {
					t.Fatalf("%s: month %s, want %s", name, got, want)
				}
			}
		}
	}
}

func TestFormattingAllocatesNothing(t *testing.T) {
	c := newZoneClock(denver(t))
	buf := make([]byte, 0, 1024)
	ns := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC).UnixNano()
	if n := testing.AllocsPerRun(1000, func() {
		buf = appendTrimmed(appendFigure(appendPU(c.append(buf[:0], ns), 1.0123456), -1234.5), 30.5)
		ns += 24 * hour
	}); n != 0 {
		t.Errorf("a row allocates %g times, want 0", n)
	}
}
