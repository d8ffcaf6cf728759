package sim_test

import (
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"yearflow/sim/feeder"
)

// netlist writes a feeder of constant impedances as a circuit for ngspice, element by
// element from the model: it knows nothing of admittance matrices, and of sim/network
// it uses no line. Windings are ideal pairs of controlled sources with a leakage
// branch, as one draws them.
type netlist struct {
	strings.Builder
	m     *feeder.Model
	w     float64 // rad/s
	count int
}

const root3 = 1.7320508075688772

func number(x float64) string { return strconv.FormatFloat(x, 'e', 16, 64) }

// node is the name of a place in the circuit.
func (n *netlist) node(i int, p feeder.Phase) string { return fmt.Sprintf("n%d%s", i, "abc12"[p:p+1]) }

// fresh returns a name that is used once.
func (n *netlist) fresh(prefix string) string {
	n.count++
	return prefix + strconv.Itoa(n.count)
}

func (n *netlist) line(format string, args ...any) {
	for i, a := range args {
		if x, ok := a.(float64); ok {
			args[i] = number(x)
		}
	}
	fmt.Fprintf(n, strings.ReplaceAll(format, "%g", "%s")+"\n", args...)
}

// conductance and susceptance stand between two places; a positive susceptance is a
// capacitor's.
func (n *netlist) conductance(a, b string, g float64) {
	if g != 0 {
		n.line("%s %s %s %g", n.fresh("R"), a, b, 1/g)
	}
}

func (n *netlist) susceptance(a, b string, s float64) {
	switch {
	case s > 0:
		n.line("%s %s %s %g", n.fresh("C"), a, b, s/n.w)
	case s < 0:
		n.line("%s %s %s %g", n.fresh("L"), a, b, -1/(s*n.w))
	}
}

// sense puts an ammeter between two places and returns its name.
func (n *netlist) sense(a, b string) string {
	v := n.fresh("V")
	n.line("%s %s %s 0", v, a, b)
	return v
}

// impedances puts coupled branches z (ohm) from a[k] to b[k]. Each branch is an
// ammeter and a chain of controlled sources: R·I by transresistances, X·jI from a
// place whose voltage is jI, the current driven through 1/ω henry.
func (n *netlist) impedances(a, b []string, z func(r, c int) complex128) {
	var meters, turned []string
	start := make([]string, len(a))
	for k := range a {
		start[k] = n.fresh("m")
		v := n.sense(a[k], start[k])
		j := n.fresh("j")
		n.line("%s 0 %s %s 1", n.fresh("F"), j, v)
		n.line("%s %s 0 %g", n.fresh("L"), j, 1/n.w)
		meters, turned = append(meters, v), append(turned, j)
	}
	for k := range a {
		at := start[k]
		for c := range a {
			x := z(k, c)
			mid, end := n.fresh("m"), n.fresh("m")
			if c == len(a)-1 {
				end = b[k]
			}
			n.line("%s %s %s %s %g", n.fresh("H"), at, mid, meters[c], real(x))
			n.line("%s %s %s %s 0 %g", n.fresh("E"), mid, end, turned[c], imag(x))
			at = end
		}
	}
}

// windings is an ideal pair: v(r, s) = gain·v(p, q) behind the impedance z in line
// with r, and gain times the current that leaves r enters at p and leaves at q.
func (n *netlist) windings(p, q, r, s string, gain float64, z complex128) {
	e := n.fresh("m")
	n.line("%s %s %s %s %s %g", n.fresh("E"), e, s, p, q, gain)
	out := r
	if z != 0 {
		out = n.fresh("m")
	}
	v := n.sense(e, out)
	n.line("%s %s %s %s %g", n.fresh("F"), p, q, v, gain)
	if z != 0 {
		n.impedances([]string{out}, []string{r}, func(int, int) complex128 { return z })
	}
}

func (n *netlist) source(s feeder.Source) {
	ph := n.m.Nodes[s.Node].Phases
	var behind, at []string
	for _, p := range ph {
		at = append(at, n.node(s.Node, p))
		b := n.node(s.Node, p)
		if !s.Stiff() && !s.AtBus {
			b = n.fresh("s")
		}
		behind = append(behind, b)
		n.line("%s %s 0 DC 0 AC %g %g", n.fresh("V"), b, s.Voltage*s.Nominal*1000/root3, s.Angle-120*float64(p))
	}
	if s.Stiff() || s.AtBus {
		return
	}
	n.impedances(behind, at, func(r, c int) complex128 {
		if r == c {
			return (s.Z0 + 2*s.Z1) / 3
		}
		return (s.Z0 - s.Z1) / 3
	})
}

func (n *netlist) section(s feeder.Section) {
	m := &n.m.Constructions[s.Construction].Matrices
	var from, to []string
	for _, p := range s.Phases {
		from, to = append(from, n.node(s.From, p)), append(to, n.node(s.To, p))
	}
	n.impedances(from, to, func(r, c int) complex128 { return m.Z[r][c] * complex(s.LengthKM, 0) })
	for _, end := range [][]string{from, to} {
		for a := range end {
			own := 0.0
			for b := range end {
				own += m.B[a][b]
				if b > a {
					n.susceptance(end[a], end[b], -m.B[a][b]*s.LengthKM/2)
				}
			}
			n.susceptance(end[a], "0", own*s.LengthKM/2)
		}
	}
}

// unitsOf lists the windings of a bank, each as "high end, high other end / low end,
// low other end": letters are terminals, N and n ground, Y and y a star point that
// floats. The vector groups follow the clock-number notation of IEC 60076-1 (recalled from memory):
// the low phase a stands as the clock's hour against A at twelve.
var unitsOf = map[string]string{
	"YNyn0": "AN/an BN/bn CN/cn",
	"YNyn6": "AN/na BN/nb CN/nc",
	"YNy0":  "AN/ay BN/by CN/cy",
	"Dyn1":  "AC/an BA/bn CB/cn", // V_AC lags V_A by 30°
	"Dyn11": "AB/an BC/bn CA/cn", // V_AB leads V_A by 30°
	"Dyn5":  "BA/an CB/bn AC/cn", // V_BA lags V_A by 150°
	"Dyn7":  "CA/an AB/bn BC/cn", // V_CA leads V_A by 150°
	"Dy1":   "AC/ay BA/by CB/cy",
	"YNd1":  "AN/ab BN/bc CN/ca", // V_ab leads V_a by 30°, so that V_a lags V_A
	"YNd11": "AN/ac BN/ba CN/cb",
	"YNd5":  "AN/ca BN/ab CN/bc",
	"Yd1":   "AY/ab BY/bc CY/ca",
	"Yd11":  "AY/ac BY/ba CY/cb",
	"Dd0":   "AB/ab BC/bc CA/ca",
	"Dd6":   "AB/ba BC/cb CA/ac",
	"Dd4":   "AB/ca BC/ab CA/bc", // V_ca lags where V_ab of clock 0 stood: a lags by 120°
}

func (n *netlist) transformer(t *testing.T, i int) {
	b := &n.m.Transformers[i]
	if b.MidTap {
		n.midTapped(b)
		return
	}
	units := unitsOf[b.Connection]
	switch b.Connection {
	case "unit":
		units = terminalsOf(b.HighEnds) + "/" + strings.ToLower(terminalsOf(b.LowEnds))
	case "1ph":
		low := strings.ToLower(b.Phases[0].String())
		units = b.Phases[0].String() + "N/" + low + "n"
		if len(b.Phases) == 2 {
			other := "n"
			for _, p := range n.m.Nodes[b.To].Phases {
				if p == b.Phases[1] {
					other = strings.ToLower(p.String())
				}
			}
			units = b.Phases[0].String() + b.Phases[1].String() + "/" + low + other
		}
	case "open-wye/open-delta":
		units = ""
		for _, p := range b.Pairs {
			units += p[0].String() + "N/" + strings.ToLower(p.String()) + " "
		}
	case "open-delta/open-delta":
		units = ""
		for _, p := range b.Pairs {
			units += p.String() + "/" + strings.ToLower(p.String()) + " "
		}
	}
	list := strings.Fields(units)
	if len(list) == 0 {
		t.Fatalf("no windings written down for %s", b.Connection)
	}
	star := map[byte]string{'Y': n.fresh("star"), 'y': n.fresh("star"), 'N': "0", 'n': "0"}
	place := func(c byte) string {
		if s, ok := star[c]; ok {
			return s
		}
		if c >= 'a' {
			return n.node(b.To, feeder.Phase(c-'a'))
		}
		return n.node(b.From, feeder.Phase(c-'A'))
	}
	for _, u := range list {
		// Line-to-line ratings of a three-phase bank are those of its delta windings;
		// a star's are √3 less. A single unit's are its windings' own.
		high, low, tap := b.HighKV*1000, b.LowKV*1000, b.TapKV*1000
		if b.Connection != "1ph" && b.Connection != "unit" {
			if strings.ContainsAny(u[:2], "NY") {
				high, tap = high/root3, tap/root3
			}
			if strings.ContainsAny(u[3:], "ny") {
				low /= root3
			}
		}
		va := b.KVA * 1000 / float64(len(list))
		z := complex(low*low/va, 0) * complex(b.R, b.X)
		n.windings(place(u[0]), place(u[1]), place(u[3]), place(u[4]), low/tap, z)
		g := b.NoLoadLoss / float64(len(list)) / (high * high)
		y := b.Exciting * va / (high * high)
		n.conductance(place(u[0]), place(u[1]), g)
		if y > g {
			n.susceptance(place(u[0]), place(u[1]), -math.Sqrt(y*y-g*g))
		}
	}
}

// terminalsOf writes the ends of a winding, N for the neutral.
func terminalsOf(ends []feeder.Phase) string {
	s := ends[0].String()
	if len(ends) == 2 {
		return s + ends[1].String()
	}
	return s + "N"
}

// midTapped draws a transformer with a grounded middle of its low winding as the three
// windings that it has: a primary behind its own impedance and two halves behind
// theirs, interlaced (L. W. Hopkinson, 1976: 0.5 R + j0.8 X; R + j0.4 X each half).
func (n *netlist) midTapped(b *feeder.Transformer) {
	half, tap, va := b.LowKV*500, b.TapKV*1000, b.KVA*1000
	p, q := n.node(b.From, b.HighEnds[0]), "0"
	if len(b.HighEnds) == 2 {
		q = n.node(b.From, b.HighEnds[1])
	}
	inner := n.fresh("m")
	n.impedances([]string{p}, []string{inner}, func(int, int) complex128 { return complex(0.5*b.R*tap*tap/va, 0.8*b.X*tap*tap/va) })
	z := complex(b.R*half*half/va, 0.4*b.X*half*half/va)
	n.windings(inner, q, n.node(b.To, b.LowEnds[0]), "0", half/tap, z)
	n.windings(inner, q, "0", n.node(b.To, b.LowEnds[1]), half/tap, z)
	high := b.HighKV * 1000
	g, y := b.NoLoadLoss/(high*high), b.Exciting*va/(high*high)
	n.conductance(p, q, g)
	if y > g {
		n.susceptance(p, q, -math.Sqrt(y*y-g*g))
	}
}

// regulator draws each unit as the autotransformer that it is: a shunt winding from
// its source (type A) or load bushing (type B) to the common bushing, and a series
// winding with k times its turns from source to load bushing.
func (n *netlist) regulator(i int, taps []int) {
	r := &n.m.Regulators[i]
	volts := n.m.Nodes[r.From].Nominal * 1000
	if r.Connection == feeder.RegulatorWye {
		volts /= root3
	}
	var z complex128
	if r.Rating > 0 {
		re, abs := r.LoadLoss/(r.Rating*r.Rating), r.Impedance*volts/r.Rating
		z = complex(re, math.Sqrt(math.Max(0, abs*abs-re*re)))
	}
	has := [3]bool{}
	load := map[feeder.Phase]string{}
	for _, u := range r.Units {
		has[u.Phase] = true
	}
	for _, p := range r.Phases {
		load[p] = n.node(r.To, p)
		switch {
		case !has[p]:
			n.sense(n.node(r.From, p), load[p])
		case z != 0:
			load[p] = n.fresh("m")
			n.impedances([]string{load[p]}, []string{n.node(r.To, p)}, func(int, int) complex128 { return z })
		}
	}
	for k, u := range r.Units {
		s, l, common := n.node(r.From, u.Phase), load[u.Phase], "0"
		other := "0" // of the no-load loss, on the source side
		if r.Connection != feeder.RegulatorWye {
			common, other = load[u.Pair[1]], n.node(r.From, u.Pair[1])
		}
		shunt := s
		if r.TypeB {
			shunt = l
		}
		n.windings(shunt, common, l, s, r.Range/float64(r.Steps)*float64(taps[k]), 0)
		n.conductance(s, other, r.NoLoadLoss/(volts*volts))
	}
}

func (n *netlist) load(l feeder.Load) {
	if l.ZIP.PZ != 1 || l.ZIP.QZ != 1 {
		panic("spice: a load is not of constant impedance: " + l.Name)
	}
	stand := func(a, b string, volts, share float64) {
		n.conductance(a, b, l.KW*1000/share/(volts*volts))
		n.susceptance(a, b, -l.KVAR*1000/share/(volts*volts))
	}
	kv := n.m.Nodes[l.Node].Nominal * 1000
	for _, p := range l.Pairs {
		stand(n.node(l.Node, p[0]), n.node(l.Node, p[1]), kv, float64(len(l.Pairs)))
	}
	for _, p := range l.Phases {
		if l.Connection == feeder.Wye {
			volts := kv / root3
			switch tapped := n.m.Nodes[l.Node].MidTap; {
			case p.Leg(), tapped != nil && (p == tapped[0] || p == tapped[1]):
				volts = kv / 2
			case tapped != nil:
				volts = kv * root3 / 2
			}
			stand(n.node(l.Node, p), "0", volts, float64(len(l.Phases)))
		}
	}
}

func (n *netlist) capacitor(c feeder.Capacitor) {
	if !c.Closed {
		return
	}
	v := c.NominalKV * 1000
	if c.Connection == feeder.Delta {
		for _, p := range c.Pairs {
			n.susceptance(n.node(c.Node, p[0]), n.node(c.Node, p[1]), c.KVAR*1000/float64(len(c.Pairs))/(v*v))
		}
		return
	}
	for _, p := range c.Phases {
		n.susceptance(n.node(c.Node, p), "0", c.KVAR*1000/float64(len(c.Phases))/(v*v/3))
	}
}

// circuit writes the whole feeder; taps are by regulator and unit. A part that nothing
// grounds gets an equal leak of 10 GΩ on the terminals of its bank.
func circuit(t *testing.T, m *feeder.Model, taps [][]int) string {
	n := &netlist{m: m, w: 2 * math.Pi * m.Frequency}
	n.line("a feeder of constant impedances")
	for _, s := range m.Sources {
		n.source(s)
	}
	for _, s := range m.Sections {
		n.section(s)
	}
	for _, s := range m.Switches {
		for _, p := range s.Phases {
			if s.Closed {
				n.sense(n.node(s.From, p), n.node(s.To, p))
			}
		}
	}
	for i := range m.Transformers {
		n.transformer(t, i)
		for _, p := range m.Nodes[m.Transformers[i].To].Phases {
			if !m.Nodes[m.Transformers[i].To].Grounded {
				n.conductance(n.node(m.Transformers[i].To, p), "0", 1e-10)
			}
		}
	}
	for i := range m.Regulators {
		n.regulator(i, taps[i])
	}
	for _, l := range m.Loads {
		n.load(l)
	}
	for _, c := range m.Capacitors {
		n.capacitor(c)
	}
	n.line(".option noopac")
	n.line(".control\nset filetype=ascii\nset numdgt=16\nac lin 1 %g %g\nwrite out.raw\nquit\n.endc\n.end", m.Frequency, m.Frequency)
	return n.String()
}

// spice runs a circuit and returns the voltages of its places.
func spice(t *testing.T, circuit string) map[string]complex128 {
	t.Helper()
	program, err := exec.LookPath("ngspice")
	if err != nil {
		t.Skip("ngspice is not installed (Debian: apt-get install ngspice): the comparison with a circuit simulator is left out")
	}
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, "feeder.cir"), []byte(circuit), 0o666); err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(program, "-b", "feeder.cir")
	cmd.Dir = dir
	said, err := cmd.CombinedOutput()
	raw, readErr := os.ReadFile(filepath.Join(dir, "out.raw"))
	if readErr != nil {
		t.Fatalf("ngspice: %v, %v\n%s", err, readErr, said)
	}
	return rawVoltages(t, string(raw))
}

// rawVoltages reads the one point of a raw file in ASCII: the list of variables, then
// one complex value each.
func rawVoltages(t *testing.T, raw string) map[string]complex128 {
	head, values, ok := strings.Cut(raw, "Values:")
	_, list, ok2 := strings.Cut(head, "\nVariables:")
	if !ok || !ok2 {
		t.Fatalf("not a raw file:\n%.400s", raw)
	}
	var names []string
	for _, l := range strings.Split(list, "\n") {
		if f := strings.Fields(l); len(f) >= 3 {
			names = append(names, f[1])
		}
	}
	f := strings.Fields(values)
	if len(f) != len(names)+1 {
		t.Fatalf("raw file: %d names, %d values", len(names), len(f)-1)
	}
	out := map[string]complex128{}
	for i, name := range names {
		re, im, _ := strings.Cut(f[i+1], ",")
		if v, isVoltage := strings.CutPrefix(name, "v("); isVoltage {
			out[strings.TrimSuffix(v, ")")] = complex(parse(t, re), parse(t, im))
		}
	}
	return out
}
