package feeder

import (
	"math/rand/v2"
	"sort"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"yearflow/sim/tables"
)

func TestCasePatchesTheModel(t *testing.T) {
	fsys := with(small(),
		"cases/c/regulator-settings.csv", "regulator,phase,set [V],limit high [V]\nreg,B,124,126\n",
		"cases/c/loads.csv", "load,node,phases,real [kW],remove\nl1,,,1000,\nl2,,,,yes\nnew,n3,B,5,\n",
		"cases/c/generators.csv", "generator,power factor\npv,0.95\n",
	)
	m := opened(t, fsys, "c").Model
	for i, want := range []float64{122, 124, 122} {
		if got := m.Regulators[0].Units[i].Settings; got.Set != want || got.Delay != 30 || (got.LimitHigh == 126) != (i == 1) {
			t.Errorf("unit %d: %+v, want set %v", i, got, want)
		}
	}
	names := ""
	for _, l := range m.Loads {
		names += l.Name + " "
	}
	if names != "l1 l3 new " || m.Loads[0].KW != 1000 || m.Loads[0].Profile != "home" {
		t.Errorf("loads %s: %+v", names, m.Loads[0])
	}
	if m.Generators[0].PF != 0.95 {
		t.Errorf("generator: %+v", m.Generators[0])
	}
	base := opened(t, fsys, "").Model
	if len(base.Loads) != 3 || base.Regulators[0].Units[1].Settings.Set != 122 {
		t.Error("a case changed the base")
	}
}

func TestCaseFaultsPointIntoTheCase(t *testing.T) {
	fsys := with(small(), "cases/c/loads.csv", "load,node,real [kW]\nl1,n9,\nl3,,x\n")
	_, err := Open(fsys, "c")
	for _, want := range []string{`cases/c/loads.csv:2:2: load "l1": unknown node "n9"`, `cases/c/loads.csv:3:3: column real [kW]: want a number, got "x"`} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("want %s in:\n%v", want, err)
		}
	}
}

// What a case takes away takes its settings along.
func TestCaseRemovesWithWhatBelongsToIt(t *testing.T) {
	fsys := with(small(), "feeder/nodes.csv", "node,x [m],y [m]\nhouse,1,2\nn2,3,4\n",
		"cases/c/regulators.csv", "regulator,remove\nreg,yes\n",
		"cases/c/sections.csv", "section,from,to,phases,length [ft],construction\nlink,bus,n1,ABC,10,trunk\n",
		"cases/c/capacitors.csv", "capacitor,remove\ncap,yes\n",
		"cases/c/transformers.csv", "transformer,remove\npole,yes\n",
		"cases/c/loads.csv", "load,remove\nl2,yes\n")
	m := opened(t, fsys, "c").Model
	if len(m.Regulators) != 0 || len(m.Capacitors) != 0 || len(m.Transformers) != 1 || len(m.Sections) != 3 {
		t.Errorf("got %+v", m)
	}
	if _, ok := m.NodeIndex("house"); ok {
		t.Error("the house stands without its transformer")
	}
}

func TestCaseEmptiesACell(t *testing.T) {
	fsys := with(small(), "feeder/switches.csv", "switch,from,to,phases,state,rating [A]\nsw,n2,n9,ABC,closed,600\n",
		"cases/c/switches.csv", "switch,rating [A],state\nsw,-,\n", "cases/c/capacitors.csv", "capacitor,state\ncap,open\n")
	m := opened(t, fsys, "c").Model
	if !Unknown(m.Switches[0].Rating) || !m.Switches[0].Closed || m.Capacitors[0].Closed {
		t.Errorf("switch %+v, capacitor %+v", m.Switches[0], m.Capacitors[0])
	}
}

// shuffled returns the study with the rows of every table in another order.
func shuffled(fsys fstest.MapFS, seed uint64) fstest.MapFS {
	r := rand.New(rand.NewPCG(seed, 1))
	out := with(fsys)
	var names []string
	for n := range fsys {
		names = append(names, n)
	}
	sort.Strings(names)
	for _, n := range names {
		if !strings.HasSuffix(n, ".csv") {
			continue
		}
		lines := strings.Split(strings.TrimSuffix(string(fsys[n].Data), "\n"), "\n")
		rows := lines[1:]
		r.Shuffle(len(rows), func(i, j int) { rows[i], rows[j] = rows[j], rows[i] })
		out[n] = &fstest.MapFile{Data: []byte(strings.Join(lines, "\n") + "\n")}
	}
	return out
}

// byNames brings the lists of a model into the order of names, with indices turned into
// names where the order of rows moves them.
func byNames(m *Model) map[string]any {
	out := map[string]any{"nodes": m.Nodes}
	for _, s := range m.Sections {
		c := m.Constructions[s.Construction]
		s.Construction = 0
		out["section "+s.Name] = []any{s, c}
	}
	for _, x := range m.Switches {
		out["switch "+x.Name] = x
	}
	for _, x := range m.Transformers {
		out["transformer "+x.Name] = x
	}
	for _, x := range m.Regulators {
		out["regulator "+x.Name] = x
	}
	for _, x := range m.Capacitors {
		watched := ""
		if x.Control != nil {
			c := *x.Control
			if c.Watched != nil {
				watched = m.Sections[c.Watched.Index].Name
			}
			c.Watched, x.Control = nil, &c
		}
		out["capacitor "+x.Name] = []any{x, watched}
	}
	for _, x := range m.Loads {
		out["load "+x.Name] = x
	}
	for _, x := range m.Generators {
		out["generator "+x.Name] = x
	}
	for _, x := range m.Sources {
		out["source "+m.Nodes[x.Node].Name] = x
	}
	return out
}

func TestOrderOfRowsDoesNotMatter(t *testing.T) {
	fsys := with(small(), "feeder/nodes.csv", "node,x [m],y [m],area\nn3,0,1,east\nn2,2,3,\nbus,4,5,west\n",
		"feeder/source.csv", "node,nominal [kV],short circuit 3ph [MVA],x/r 3ph\ngrid,69,900,9\nn1,12.47,90,9\n")
	options := cmp.Options{cmpopts.EquateNaNs(), cmpopts.IgnoreTypes(tables.Pos{}), cmpopts.EquateApprox(0, 0)}
	want := byNames(opened(t, fsys, "").Model)
	for seed := range uint64(20) {
		if d := cmp.Diff(want, byNames(opened(t, shuffled(fsys, seed), "").Model), options); d != "" {
			t.Fatalf("seed %d (-want +got):\n%s", seed, d)
		}
	}
}
