package study_test

import (
	"context"
	"encoding/csv"
	"html"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"yearflow/plots"
	"yearflow/sim/study"
)

// estimate writes the loss estimate of a study and returns its folder, its page and
// marginal.csv.
func estimate(t *testing.T, p study.Place, samples int) (dir, page string, marginal [][]string) {
	t.Helper()
	l, err := study.Losses(context.Background(), p, study.LossSettings{Samples: samples})
	if err != nil {
		t.Fatal(err)
	}
	dir = filepath.Join(p.Results, "losses")
	if err := l.Write(dir, p, document(t, "losses.html", plots.LossesDocument)); err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(filepath.Join(dir, "losses.html"))
	if err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(filepath.Join(dir, "marginal.csv"))
	if err != nil {
		t.Fatal(err)
	}
	if marginal, err = csv.NewReader(strings.NewReader(string(data))).ReadAll(); err != nil {
		t.Fatal(err)
	}
	return dir, string(text), marginal
}

func columnOf(t *testing.T, rows [][]string, name string) (out []string) {
	t.Helper()
	i := slices.Index(rows[0], name)
	if i < 0 {
		t.Fatalf("there is no column %q in %v", name, rows[0])
	}
	for _, r := range rows[1:] {
		out = append(out, r[i])
	}
	return out
}

// Where a feeder has coordinates its marginal losses stand on a map, where it has none
// against distance; either says of marginal.csv what is highest and lowest, and what it
// draws stands there.
func TestMarginalLossesAreDrawn(t *testing.T) {
	small := smallFeeder("[prices]\nenergy = 0.1\n")
	for _, x := range []struct {
		name, nodes, figure string
		columns             []string
	}{
		{"no coordinates", "", "marginal-losses-distance.png", nil},
		{"metres", "node,x [m],y [m]\nhead,0,0\nmid,5000,0\nend,9000,4000\n", "marginal-losses-map.png", []string{"x [m]", "y [m]"}},
		{"degrees", "node,longitude [deg],latitude [deg]\nhead,-105,40\nmid,-105.02,40.01\nend,-105.06,40.02\n", "marginal-losses-map.png", []string{"longitude [deg]", "latitude [deg]"}},
	} {
		t.Run(x.name, func(t *testing.T) {
			files := map[string]string{}
			for k, v := range small {
				files[k] = v
			}
			if x.nodes != "" {
				files["feeder/nodes.csv"] = x.nodes
			}
			dir, page, rows := estimate(t, folder(t, nil, files), 12)
			for _, f := range []string{x.figure, "value-of-a-kw.png"} {
				if _, err := os.Stat(filepath.Join(dir, "figures", f)); err != nil {
					t.Error(err)
				}
			}
			for _, c := range x.columns {
				columnOf(t, rows, c)
			}
			nodes, fed := columnOf(t, rows, "node"), columnOf(t, rows, "fed from")
			want := map[string]string{"head": "", "mid": "head", "reg": "mid", "end": "reg"}
			for i, n := range nodes {
				if fed[i] != want[n] {
					t.Errorf("%s is fed from %q, want %q", n, fed[i], want[n])
				}
			}
			// The table is in falling order: its ends are those of the finding.
			if nodes[0] != "end" || nodes[len(nodes)-1] != "head" {
				t.Errorf("the order is %v: the end of the line loses most at the margin, the source nothing", nodes)
			}
			m := columnOf(t, rows, "marginal losses [%]")
			high, err := strconv.ParseFloat(m[0], 64)
			if err != nil {
				t.Fatal(err)
			}
			finding := "A kW more costs most losses on the way to end, " + strconv.FormatFloat(high, 'f', 1, 64) + " % of it, and least to head, 0.0 %"
			if !strings.Contains(html.UnescapeString(page), finding) {
				t.Errorf("the page does not say %q", finding)
			}
			numbers(t, dir, "losses.html", 100)
		})
	}
}

// Without a price there is no money in the table, and no figure of it.
func TestMarginalLossesWithoutPrices(t *testing.T) {
	dir, page, rows := estimate(t, folder(t, nil, smallFeeder("")), 6)
	for _, h := range rows[0] {
		if strings.Contains(h, "value") || strings.Contains(h, "USD") {
			t.Errorf("column %q without a price", h)
		}
	}
	if _, err := os.Stat(filepath.Join(dir, "figures", "value-of-a-kw.png")); err == nil {
		t.Error("there is a figure of the value of a kW without a price")
	}
	if !strings.Contains(page, "[prices]") {
		t.Error("the page does not say that [prices] is missing")
	}
}
