package sim_test

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// headMeter is a recorder that meters the source and every load as a utility would:
// means over each step.
type headMeter struct {
	e     *sim.Engine
	now   [3]complex128 // VA·h of the step at hand
	amps  [3]float64
	mean  [][3]complex128 // VA
	ampsM [][3]float64    // A
	ends  [][3]complex128 // at the end of the step
	kWh   []float64       // by load
	kvarh []float64
	alloc []results.AllocationRow
	worst []float64
	acts  int
}

func (h *headMeter) phases(s *results.State) (out [3]complex128, amps [3]float64) {
	net := h.e.Plan.Network
	node := net.Model.Sources[0].Node
	for p := range 3 {
		i := s.Source[0][p]
		out[p] = s.V[net.At[node][p]] * cmplx.Conj(i)
		amps[p] = cmplx.Abs(i)
	}
	return out, amps
}

func (h *headMeter) Interval(iv *results.Interval) error {
	hours := float64(iv.End-iv.Start) / 3.6e12
	s, amps := h.phases(iv.State)
	for p := range 3 {
		h.now[p] += s[p] * complex(hours, 0)
		h.amps[p] += amps[p] * hours
	}
	if h.kWh == nil {
		h.kWh, h.kvarh = make([]float64, len(iv.State.Load)), make([]float64, len(iv.State.Load))
	}
	for i, l := range iv.State.Load {
		h.kWh[i] += real(l) / 1000 * hours
		h.kvarh[i] += imag(l) / 1000 * hours
	}
	return nil
}

func (h *headMeter) Action(*results.Action) error { h.acts++; return nil }

func (h *headMeter) Step(s *results.Step) error {
	hours := float64(s.End-s.Start) / 3.6e12
	for p := range 3 {
		h.now[p] /= complex(hours, 0)
		h.amps[p] /= hours
	}
	h.mean, h.ampsM = append(h.mean, h.now), append(h.ampsM, h.amps)
	h.now, h.amps = [3]complex128{}, [3]float64{}
	var end [3]complex128
	if s.Last != nil {
		end, _ = h.phases(s.Last)
	}
	h.ends = append(h.ends, end)
	if s.Allocation != nil {
		h.alloc = append(h.alloc, s.Allocation.Rows...)
		h.worst = append(h.worst, s.Allocation.Worst)
	}
	return nil
}

// meterRun runs a study with a meter at its head.
func meterRun(t *testing.T, f fstest.MapFS, caseName string) *headMeter {
	t.Helper()
	st, err := feeder.Open(f, caseName)
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	h := &headMeter{e: e}
	if _, err := e.Run(context.Background(), h); err != nil {
		t.Fatal(err)
	}
	return h
}

// profileOf writes what the meter read as a file of profiles: head (total) and head a,
// b, c in [kW] with [kvar], amps a, b, c in [A].
func (h *headMeter) profileOf(values [][3]complex128) string {
	var b strings.Builder
	b.WriteString("time,head [kW],head [kvar]")
	for _, p := range "abc" {
		fmt.Fprintf(&b, ",head %c [kW],head %c [kvar],amps %c [A]", p, p, p)
	}
	b.WriteString(",amps [A]\n")
	for k, s := range values {
		sum := s[0] + s[1] + s[2]
		fmt.Fprintf(&b, "2025-03-%02dT%02d:00,%.9f,%.9f", 3+k/24, k%24, real(sum)/1000, imag(sum)/1000)
		for p := range 3 {
			fmt.Fprintf(&b, ",%.9f,%.9f,%.9f", real(s[p])/1000, imag(s[p])/1000, h.ampsM[k][p])
		}
		fmt.Fprintf(&b, ",%.9f\n", (h.ampsM[k][0]+h.ampsM[k][1]+h.ampsM[k][2])/3)
	}
	return b.String()
}

// peakOf is the highest total real power, W, and that of one phase.
func (h *headMeter) peakOf() (total float64, phase [3]float64) {
	for _, s := range h.mean {
		total = math.Max(total, real(s[0]+s[1]+s[2]))
		for p := range 3 {
			phase[p] = math.Max(phase[p], real(s[p]))
		}
	}
	return total, phase
}

// townLoads are loads on everything that a feeder has: wye and delta, one phase, a bank
// that turns phases, the legs of a service, with kVA as the key of their size.
// Columns: name, node, phases, connection, kVA, power factor, zip.
var townLoads = []struct {
	name, node, phases, connection string
	kVA, factor                    float64
	zip                            string
}{
	{"mill", "end", "ABC", "wye", 600, 0.9, "power"},
	{"a1", "mid", "A", "wye", 400, 0.95, "power"},
	{"b1", "mid", "B", "wye", 250, 0.92, "current"},
	{"c1", "end", "C", "wye", 150, 0.97, "impedance"},
	{"pump", "end", "AB", "delta", 120, 0.85, "power"},
	{"shop1", "shop", "A", "wye", 60, 0.9, "power"},
	{"shop2", "shop", "ABC", "wye", 90, 0.9, "power"},
	{"home1", "home", "1", "wye", 10, 0.98, "power"},
	{"home2", "home", "12", "delta", 8, 0.98, "power"},
}

// town is a feeder with these loads at 0.4 kW per kVA, each following the day.
func town(loads, allocation string, extra map[string]string) fstest.MapFS {
	f := plantStudy("1h", 3, map[string]string{
		"study.toml": "title = \"Town\"\n[period]\nstart = 2025-03-03\nend = 2025-03-06\nstep = \"1h\"\nzone = \"UTC\"\n" +
			"[[profiles]]\nfiles = [\"profiles/day.csv\"]\nrepeat = \"day\"\n[[profiles]]\nfiles = [\"profiles/head*.csv\"]\n[run]\nstart = \"given\"\n" + allocation,
		"feeder/source.csv":       "node,nominal [kV],voltage [pu],short circuit 3ph [MVA],x/r 3ph\nbus,12.47,1.02,150,8\n",
		"feeder/sections.csv":     "section,from,to,phases,length [km],construction\nL1,bus,mid,ABC,3,line\nL2,mid,end,ABC,3,line\n",
		"feeder/transformers.csv": "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%],no-load loss [W]\nt1,end,shop,ABC,300,12.47,0.48,Dyn1,1.1,4,600\nt2,mid,home,C,25,7.2,0.24,center-tap,1.2,1.6,55\n",
		"feeder/loads.csv":        loads,
	})
	for name, s := range extra {
		f[name] = text(s)
	}
	return f
}

// known gives the loads in kW; metered names of them are metered by profile "m" in kW.
func known(skip ...string) string {
	out := "load,node,phases,connection,real [kW],connected [kVA],power factor,zip,profile\n"
	for _, l := range townLoads {
		if strings.Contains(strings.Join(skip, " "), l.name) {
			continue
		}
		out += fmt.Sprintf("%s,%s,%s,%s,%g,,%g,%s,day\n", l.name, l.node, l.phases, l.connection, 0.4*l.kVA, l.factor, l.zip)
	}
	return out
}

// forgotten gives their kVA alone.
func forgotten() string {
	out := "load,node,phases,connection,real [kW],connected [kVA],power factor,zip,profile\n"
	for _, l := range townLoads {
		out += fmt.Sprintf("%s,%s,%s,%s,,%g,%g,%s,day\n", l.name, l.node, l.phases, l.connection, l.kVA, l.factor, l.zip)
	}
	return out
}

// Simulate, forget the loads, allocate from the head, compare: with exact weights every
// load is found again, however the head was measured: the solved source is the measured
// one to 0.1 % of its peak, and each load's energies are what they were.
func TestAllocationRoundTrip(t *testing.T) {
	truth := meterRun(t, town(known(), "", nil), "")
	total, byPhase := truth.peakOf()
	file := truth.profileOf(truth.mean)
	if r := byPhase[0] / byPhase[2]; r < 1.2 {
		t.Fatalf("the feeder is to be unbalanced; A has %.2f of C", r)
	}
	for _, tt := range []struct {
		name, allocation string
		bound            float64 // of each load's energy
	}{
		{"total", "real = \"head\"\n", 1e-3},
		{"total kW alone", "at = \"source\"\nreal = \"head\"\npower_factor = 0.9\n", 0.2}, // kvar by a factor that is not the feeder's
		{"phases", "real = { A = \"head a\", B = \"head b\", C = \"head c\" }\n", 2e-3},
		{"total kW, kvar by phase", "real = \"head\"\nreactive = { A = \"head a\", B = \"head b\", C = \"head c\" }\n", 2e-3},
		{"amperes by phase", "current = { A = \"amps a\", B = \"amps b\", C = \"amps c\" }\n", 2e-3},
		{"amperes, mean", "current = \"amps\"\n", 1e-3},
		{"section", "at = \"L1\"\nreal = { A = \"head a\", B = \"head b\", C = \"head c\" }\n", 5e-3},
	} {
		t.Run(tt.name, func(t *testing.T) {
			got := meterRun(t, town(forgotten(), "[allocation]\n"+tt.allocation, map[string]string{"profiles/head.csv": file}), "")
			if len(got.worst) != 72 || len(got.alloc) > 0 {
				t.Fatalf("%d steps, not met: %+v", len(got.worst), got.alloc)
			}
			for k := range got.mean {
				var sum complex128
				for p := range 3 {
					d := got.mean[k][p] - truth.mean[k][p]
					sum += d
					if strings.Contains(tt.name, "phase") && math.Abs(real(d)) > 2e-3*byPhase[p] {
						t.Errorf("hour %d, phase %d: %.3f kW off", k, p, real(d)/1000)
					}
				}
				if math.Abs(real(sum)) > 1e-3*total {
					t.Errorf("hour %d: %.3f kW off of %.0f kW", k, real(sum)/1000, total/1000)
				}
				if tt.name != "total kW alone" && math.Abs(imag(sum)) > 1e-3*total {
					t.Errorf("hour %d: %.3f kvar off", k, imag(sum)/1000)
				}
			}
			for i, want := range truth.kWh {
				if r := got.kWh[i]/want - 1; math.Abs(r) > tt.bound {
					t.Errorf("%s: %.2f kWh, was %.2f", townLoads[i].name, got.kWh[i], want)
				}
			}
			if tt.name == "total kW alone" {
				for k := range got.ends {
					s := got.ends[k][0] + got.ends[k][1] + got.ends[k][2]
					if f := real(s) / cmplx.Abs(s); math.Abs(f-0.9) > 1e-3 {
						t.Errorf("hour %d: power factor %.5f at the head", k, f)
					}
				}
			}
		})
	}
}
