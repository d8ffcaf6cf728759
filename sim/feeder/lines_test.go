package feeder

import (
	"math/cmplx"
	"strings"
	"testing"
)

// kersting is the four-wire line of W. H. Kersting, Distribution System Modeling and
// Analysis, example 4.1, in our tables.
var kersting = []string{
	"feeder/constructions.csv", "construction,kind,spacing,phase conductor,neutral conductor\ntrunk,overhead,crossarm,wire,4/0 own\n",
	"feeder/spacings.csv", "spacing,position,x [ft],y [ft]\ncrossarm,1,0,29\ncrossarm,2,2.5,29\ncrossarm,3,7,29\ncrossarm,N,4,25\n",
	"feeder/conductors.csv", "conductor,resistance [ohm/mi],gmr [ft],diameter [in],rating [A]\nwire,0.306,0.0244,0.721,530\n4/0 own,0.592,0.00814,0.563,340\n",
}

func TestOverheadLineFromTables(t *testing.T) {
	m := opened(t, with(small(), kersting...), "").Model
	c := m.Constructions[0]
	// Kersting, example 4.1, ohm/mi, to the printed digits.
	for _, want := range []struct {
		i, j int
		z    complex128
	}{{0, 0, 0.4576 + 1.0780i}, {1, 0, 0.1560 + 0.5017i}, {1, 1, 0.4666 + 1.0482i}, {2, 0, 0.1535 + 0.3849i}, {2, 1, 0.1580 + 0.4236i}, {2, 2, 0.4615 + 1.0651i}} {
		if z := c.Matrices.Z[want.i][want.j] * 1.609344; cmplx.Abs(z-want.z) > 2e-4 {
			t.Errorf("z%d%d = %.4f ohm/mi, want %.4f", want.i+1, want.j+1, z, want.z)
		}
	}
	if c.Rating != 530 || m.Sections[0].Rating != 530 || assumed(m, "construction trunk: rating [A]") != "530 (that of conductor wire)" ||
		assumed(m, "construction trunk: earth resistivity [ohm m]") != "100" {
		t.Errorf("rating %v; assumed %+v", c.Rating, m.Assumed)
	}
}

func TestMatrixFromTables(t *testing.T) {
	construction := []string{"feeder/constructions.csv", "construction,kind\ntrunk,matrix\n"}
	rows := "construction,row,column,r [ohm/mi],x [ohm/mi],b [uS/mi]\ntrunk,1,1,0.4576,1.078,5.6712\ntrunk,2,1,0.156,0.5017,-1.8362\ntrunk,2,2,0.4666,1.0482,5.9774\ntrunk,3,1,0.1535,0.3849,-0.7034\ntrunk,3,2,0.158,0.4236,-1.169\ntrunk,3,3,0.4615,1.0651,5.3911\n"
	fsys := with(with(small(), construction...), "feeder/impedances.csv", rows)
	c := opened(t, fsys, "").Model.Constructions[0].Matrices
	if z := c.Z[0][2] * 1.609344; c.N != 3 || cmplx.Abs(z-(0.1535+0.3849i)) > 1e-12 || c.Z[2][0] != c.Z[0][2] || c.B[0][1] != c.B[1][0] || c.B[0][1]*1.609344e6 > -1.8361 {
		t.Errorf("got %+v", c)
	}
	for _, tt := range []struct{ old, new, at, want string }{
		{"trunk,3,2,0.158,0.4236,-1.169\n", "", "feeder/constructions.csv:2", "row 3, column 2 is missing"},
		{"trunk,3,3", "trunk,4,4", "feeder/impedances.csv:7:2", "the positions are 1, 2 and 3"},
		{"trunk,3,3,0.4615", "trunk,3,3,-0.4615", "feeder/constructions.csv:2", "r of position 3 must be above 0"},
		{"trunk,3,3", "trink,3,3", "feeder/impedances.csv:7:1", `construction "trink" is not one of kind matrix in constructions.csv; did you mean "trunk"?`},
		{"trunk,3,3,0.4615", "trunk,1,2,9,9,9\ntrunk,3,3,0.4615", "feeder/impedances.csv:7:2", "the matrix is symmetrical"},
	} {
		wantFault(t, with(fsys, "feeder/impedances.csv", strings.Replace(rows, tt.old, tt.new, 1)), tt.at, tt.want)
	}
}

func TestConstructionFaults(t *testing.T) {
	base := with(small(), kersting...)
	row := func(cells string) string {
		return "construction,kind,spacing,phase conductor,neutral conductor,r1 [ohm/mi]\ntrunk," + cells + "\n"
	}
	for _, tt := range []struct{ cells, at, want string }{
		{"overhead,crossarms,wire,4/0 own,", "2:3", `unknown spacing "crossarms"; did you mean "crossarm"?`},
		{"overhead,crossarm,wires,4/0 own,", "2:4", `unknown phase conductor "wires"; did you mean "wire"?`},
		{"overhead,crossarm,wire,,", "2", "neutral conductor is blank; this kind needs it"},
		{"overhead,,wire,4/0 own,", "2", "spacing is blank; this kind needs it"},
		{"overhead,crossarm,wire,4/0 own,0.3", "2:6", "kind overhead does not read r1"},
		{"triplex,crossarm,wire,4/0 own,", "2:3", "a triplex is bundled"},
		{"sequence,,,,0.3", "2", "x1 is blank"},
		{"matrix,,,,", "2", "there are no rows of it in impedances.csv"},
		{"concentric neutral,crossarm,cabel,4/0 own,", "2:4", `unknown phase conductor "cabel"`},
	} {
		wantFault(t, with(base, "feeder/constructions.csv", row(tt.cells)), "feeder/constructions.csv:"+tt.at, tt.want)
	}
	sections := string(small()["feeder/sections.csv"].Data)
	wantFault(t, with(base, "feeder/sections.csv", strings.Replace(sections, "1000,trunk", "1000,trink", 1)), "feeder/sections.csv:3:6", `unknown construction "trink"; did you mean "trunk"?`)
	wantFault(t, with(base, "feeder/spacings.csv", "spacing,position,x [ft],y [ft]\ncrossarm,1,0,29\ncrossarm,N,4,25\n"), "feeder/sections.csv:2:4", `section "s1" has 3 phases, its construction "trunk" 1 positions`)
	wantFault(t, with(base, "feeder/spacings.csv", "spacing,position,x [ft],y [ft]\ncrossarm,1,0,29\ncrossarm,3,7,29\ncrossarm,N,4,25\n"), "feeder/spacings.csv:2", "its positions must be 1, or 1 and 2")
	wantFault(t, with(base, "feeder/sections.csv", strings.Replace(sections, "n2,n3", "n3,n3", 1)), "feeder/sections.csv:3:3", "from and to are the same node")
}
