package sim_test

import (
	"bytes"
	"compress/zlib"
	"context"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
)

// measuredDemand returns the half-hourly demand of England and Wales, MW, from 5 June
// to 27 August 2000: the series `taylor` of R. J. Hyndman and Y. Khandakar's package
// forecast (Debian's r-cran-forecast, GPL-3; read where it is installed, no part of this
// repository), from J. W. Taylor, Journal of the Operational Research Society 54 (2003)
// 799-805: a vector of 4,032 integers in R's serialization.
func measuredDemand(t *testing.T) []float64 {
	t.Helper()
	data, err := os.ReadFile("/usr/lib/R/site-library/forecast/data/Rdata.rdb")
	if err != nil {
		t.Skipf("the package r-cran-forecast is not installed: %v", err)
	}
	head := []byte{0, 0, 3, 13, 0, 0, 0x0f, 0xc0}
	for r := bytes.NewReader(data); r.Len() > 4; {
		if _, err := r.Seek(4, io.SeekCurrent); err != nil {
			t.Fatal(err)
		}
		z, err := zlib.NewReader(r)
		if err != nil {
			t.Fatal(err)
		}
		object, err := io.ReadAll(z)
		if err != nil {
			t.Fatal(err)
		}
		if i := bytes.Index(object, head); i >= 0 {
			values := make([]float64, 4032)
			for k := range values {
				values[k] = float64(binary.BigEndian.Uint32(object[i+len(head)+4*k:]))
			}
			return values
		}
	}
	t.Fatal("the data hold no series of 4,032 integers")
	return nil
}

// demandWatch adds up what the load draws and holds every interval to its balance.
type demandWatch struct {
	t     *testing.T
	meter *results.Meter
	kWh   float64
}

func (w *demandWatch) Interval(iv *results.Interval) error {
	if p, q, scale := w.meter.Balance(iv.State); math.Abs(p)+math.Abs(q) > 1e-6*scale {
		w.t.Errorf("imbalance %g W, %g var of %g VA", p, q, scale)
	}
	w.kWh += real(iv.State.Load[0]) / 1000 * float64(iv.End-iv.Start) / 3.6e12
	return nil
}
func (w *demandWatch) Action(*results.Action) error { return nil }
func (w *demandWatch) Step(s *results.Step) error {
	if s.Status != results.OK {
		w.t.Errorf("step is %s at %s", s.Status, s.Where)
	}
	return nil
}

// Measured demand as real input of a feeder: a week of it, scaled to a village by the
// multiplier of meters.csv, goes through the meters' reader and a power flow at every
// half hour; the energy that arrives is that of the series.
func TestMeasuredDemandThroughAFeeder(t *testing.T) {
	values := measuredDemand(t)[:7*48]
	var b strings.Builder
	b.WriteString("time,meter,value [MW]\n")
	want, start := 0.0, time.Date(2000, 6, 5, 0, 0, 0, 0, time.UTC)
	const village = 1.0 / 20000
	for k, v := range values {
		fmt.Fprintf(&b, "%s,national,%g\n", start.Add(time.Duration(k)*30*time.Minute).Format("2006-01-02T15:04Z"), v)
		want += v * 1000 * village / 2
	}
	f := plantStudy("30min", 1, map[string]string{
		"feeder/loads.csv":  "load,node,phases,power factor,zip\nvillage,end,ABC,0.97,power\n",
		"feeder/meters.csv": fmt.Sprintf("meter,load,multiplier\nnational,village,%.10g\n", village),
		"meters/a.csv":      b.String(),
	})
	delete(f, "profiles/day.csv")
	f["study.toml"] = text("title = \"Village\"\n[period]\nstart = 2000-06-05\nend = 2000-06-12\nstep = \"30min\"\nzone = \"UTC\"\n[[meters]]\nfiles = [\"meters/*.csv\"]\n")
	e := ready(t, f)
	w := &demandWatch{t: t, meter: e.Meter()}
	if _, err := e.Run(context.Background(), w); err != nil {
		t.Fatal(err)
	}
	if math.Abs(w.kWh-want) > 1e-5*want || want < 100000 {
		t.Errorf("the feeder delivers %.2f kWh, the series has %.2f kWh", w.kWh, want)
	}
	if len(e.Plan.Mended) != 0 {
		t.Errorf("good data were edited: %+v", e.Plan.Mended)
	}
	var _ sim.Recorder = w
}
