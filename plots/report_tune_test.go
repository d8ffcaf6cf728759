package plots

import (
	"bytes"
	"image/color"
	"image/png"
	"math"
	"strings"
	"testing"

	"yearflow/sim/results"
)

// ledgerOf makes a ledger of lines of comma-separated cells.
func ledgerOf(file string, keys int, lines ...string) *Ledger {
	l := &Ledger{File: file, Keys: keys, Header: strings.Split(lines[0], ",")}
	for _, x := range lines[1:] {
		l.Rows = append(l.Rows, strings.Split(x, ","))
	}
	return l
}

// inventedSearch is a search over three settings for two aims, with numbers that can be
// worked out in the head.
func inventedSearch() *tuneDocument {
	return &tuneDocument{
		severalRuns: &severalRuns{record: &results.TablesRecord{Title: "Invented", Said: map[string]any{"improves": true}}},
		tune: ledgerOf("tune.csv", 1, "quantity,unit,base,best,change,change [%],weight,part of score of the base,part of score of the best,limit,kept by the base,kept by the best",
			"score,1,1000.0000,800.0000,-200.0000,-20.0000,,1000.0000,800.0000,,yes,yes",
			"losses energy,kWh,600.0000,500.0000,-100.0000,-16.6667,1,600.0000,500.0000,,,",
			"operations,1,400,300,-100,-25.0000,1,400.0000,300.0000,,,"),
		settings: ledgerOf("settings.csv", 3, "device,phase,setting,unit,low,high,step,base,best,change,lowest as good,highest as good",
			"R1,all,set,V,120,124,1,122,121,-1.0000,121,122", "R1,all,bandwidth,V,2,4,1,2,2,0.0000,2,4", "C1,,time on,h,06:00,10:00,1,08:00,07:00,-1.0000,07:00,07:00"),
		weights: ledgerOf("weights.csv", 1, "quantity,unit,weight,source,range of its part of the score,range among the undominated", "losses energy,kWh,1,given,300.0000,100.0000", "operations,1,1,given,250.0000,90.0000"),
		search:  ledgerOf("search.csv", 1, "quantity,value,unit", "highest score as good as the best,820.0000,1"),
		sensitivity: ledgerOf("sensitivity.csv", 4, "rank,device,phase,setting,unit,best,range of score,one step down,one step up,flat from,flat to,points,at bound",
			"1,R1,all,set,V,121,150.0000,50.0000,10.0000,121,122,3,", "2,C1,,time on,h,07:00,40.0000,,40.0000,07:00,07:00,2,", "3,R1,all,bandwidth,V,2,5.00000,,5.00000,2,4,2,low"),
		profile: ledgerOf("profile.csv", 5, "device,phase,setting,unit,value,candidate,score,score less that of the best,limits kept",
			"R1,all,set,V,120,1,850.0000,50.0000,yes", "R1,all,set,V,121,5,800.0000,0.0000,yes", "R1,all,set,V,122,2,810.0000,10.0000,yes",
			"R1,all,bandwidth,V,2,5,800.0000,0.0000,yes", "R1,all,bandwidth,V,4,6,805.0000,5.0000,yes",
			"C1,,time on,h,07:00,5,800.0000,0.0000,yes", "C1,,time on,h,08:00,7,840.0000,40.0000,no"),
		progress: ledgerOf("progress.csv", 1, "candidate-years,candidate,from,score,score less that of the base,limits kept,violation",
			"1,0,base,1000.0000,0.0000,yes,0.0000", "3,2,start,815.0000,-185.0000,yes,0.0000", "5,5,compass,800.0000,-200.0000,yes,0.0000"),
		front: ledgerOf("undominated.csv", 1, "candidate,R1.all set [V],score,losses energy [kWh],operations,note", "5,121,800.0000,500.0000,300,the best", "2,122,815.0000,400.0000,415,"),
		candidates: ledgerOf("candidates.csv", 1, "candidate,from,score,limits kept,violation,losses energy [kWh],operations", "0,base,1000.0000,yes,0.0000,600.0000,400", "1,start,1900.0000,yes,0.0000,900.0000,1000",
			"2,start,815.0000,yes,0.0000,400.0000,415", "3,start,,no,,,", "4,start,700.0000,no,0.2000,350.0000,350", "5,compass,800.0000,yes,0.0000,500.0000,300"),
		aims: 2,
	}
}

// What the figures of a search say, against what stands in the tables above.
func TestTuneFindings(t *testing.T) {
	d := inventedSearch()
	st := newStyle(50)
	_, best := d.bestFigure(st)
	_, progress := d.progressFigure(st)
	_, flat := d.profileFigure(st)
	_, matter := d.matterFigure(st)
	_, trade := d.tradeFigure(st)
	for _, tt := range []struct{ what, got, want string }{
		{"best", best.Finding, "The best against the base: score \u221220 %, losses energy \u221217 %, operations \u221225 %."},
		// 185 of 200 are more than nine tenths.
		{"progress", progress.Finding, "The best was found after 5 of 5 candidate-years; nine tenths of its gain of 200 were there after 3."},
		// The share of the range that is flat: set 1 of 4, time on 0 of 4, bandwidth 2 of 2.
		{"flat", flat.Finding, "Of the values tried, the sharpest setting is C1 time on, as good as the best at 07:00 only; the flattest is R1 bandwidth, at 2 to 4 V."},
		// As good is a rise of up to 20: the bandwidth's 5.
		{"matter", matter.Finding, "The score depends most on R1 set, by 150 over the values tried; 2 of 3 settings alone can take it away from the best."},
		{"trade", trade.Finding, "Between the ends of the undominated, losses energy goes from 400.0 kWh to 500.0 kWh and operations from 415 to 300."},
	} {
		if tt.got != tt.want {
			t.Errorf("%s:\n got  %s\n want %s", tt.what, tt.got, tt.want)
		}
	}
}

// A best on a bound is told on the first page: the bandwidth's 2 is the lowest allowed.
func TestTuneTellsOfBounds(t *testing.T) {
	d := inventedSearch()
	d.search.Rows = append(d.search.Rows, []string{"candidate-years", "5", "1"})
	d.limits = ledgerOf("limits.csv", 1, "quantity,sense,value,unit,kept by the base,kept by the best")
	var said string
	for _, b := range d.leadFindings() {
		if f, is := b.(Finding); is && f.Bad {
			said += f.Text.String()
		}
	}
	if want := "The best lies on a bound of R1 bandwidth (low): a better one may lie beyond."; !strings.HasPrefix(said, want) {
		t.Errorf("got %q, want %q", said, want)
	}
}

// Findings of searches that found little do not claim more.
func TestTuneFindingsOfLittle(t *testing.T) {
	d := inventedSearch()
	d.progress.Rows = d.progress.Rows[:1]
	if got := d.progressFinding(1); got != "No candidate of 1 candidate-year is better than the base, whose score is 1,000." {
		t.Error(got)
	}
	d = inventedSearch()
	d.progress.Rows[0][5] = "no"
	if got := d.progressFinding(5); got != "The base breaks a limit; all limits were first kept after 3 of 5 candidate-years, and the best was found after 5." {
		t.Error(got)
	}
	d = inventedSearch()
	d.sensitivity.Rows[1][6], d.sensitivity.Rows[2][6] = "", ""
	if got := d.matterFinding(); !strings.HasSuffix(got, "by 150 over the values tried. Of 2 settings nothing is known: the budget was spent.") {
		t.Error(got)
	}
	d.sensitivity.Rows[0][6] = "0.0000"
	if got := d.matterFinding(); !strings.HasPrefix(got, "No setting alone changes the score.") {
		t.Error(got)
	}
	d.sensitivity.Rows[0][6] = ""
	if p, _ := d.matterFigure(newStyle(50)); p != nil {
		t.Error("a figure of nothing")
	}
	d = inventedSearch()
	d.front.Rows = d.front.Rows[:1]
	if got := d.tradeFinding(0, 1); !strings.Contains(got, "nothing to be traded") {
		t.Error(got)
	}
	d.profile.Rows = nil
	if p, _ := d.profileFigure(newStyle(50)); p != nil {
		t.Error("a figure of no profile")
	}
	d.tune.Rows[0][3] = ""
	if p, _ := d.bestFigure(newStyle(50)); p != nil {
		t.Error("a figure of no best")
	}
	whole := settingProfile{name: "a", low: 1, high: 3, flatLow: 1, flatHigh: 3}
	if got := flatFinding([]settingProfile{whole, whole}); !strings.HasPrefix(got, "No setting matters alone") {
		t.Error(got)
	}
}

// The two aims are those with most to trade, wherever they stand; where one candidate is
// the best in all of them, those that decide most.
func TestMainAims(t *testing.T) {
	for _, tt := range []struct {
		weights, front string // of the aims; the undominated, a candidate a word, its aims by slashes
		spans          string // ranges among the undominated
		a, b           int
	}{
		{"1 1", "1/9 9/1", "8 8", 0, 1},
		// b and c: 5 against 4. a and b: the best in a is nearly as good in b.
		{"1 1 1", "0/9/1 1/4/5 90/8/1", "90 5 4", 1, 2},
		// The same with c weighed at 100 and a tenth of its numbers: still b and c.
		{"1 1 10", "0/9/0.1 1/4/0.5 90/8/0.1", "90 5 4", 1, 2},
		// More of c is better: a and c.
		{"1 1 -1", "0/1/1 9/1/9", "9 0 8", 0, 2},
		{"1 1 1 1", "1/1/1/1", "0 8 2 9", 1, 3},
		{"1 1 1", "1/1/1", "4 4 4", 0, 1},
	} {
		d := &tuneDocument{weights: &Ledger{Keys: 1, Header: []string{"quantity", "unit", "weight", "range among the undominated", "range of its part of the score"}}, front: &Ledger{}}
		spans := strings.Fields(tt.spans)
		for i, w := range strings.Fields(tt.weights) {
			name := string(rune('a' + i))
			d.weights.Rows = append(d.weights.Rows, []string{name, "1", w, spans[i], "1"})
			d.front.Header = append(d.front.Header, name)
		}
		for _, c := range strings.Fields(tt.front) {
			d.front.Rows = append(d.front.Rows, strings.Split(c, "/"))
		}
		d.aims = len(spans)
		if a, b := d.mainAims(); a != tt.a || b != tt.b {
			t.Errorf("%+v: %d and %d", tt, a, b)
		}
	}
}

// The best and the others are told apart in grey, and every figure has ink in its body.
func TestTuneFiguresInGrey(t *testing.T) {
	for _, pair := range [][2]color.NRGBA{{sky, blue}, {blue, missing}, {vermilion, missing}, {flatGreen, blue}, {flatGreen, vermilion}} {
		if d := math.Abs(lightness(pair[0]) - lightness(pair[1])); d < 0.15 {
			t.Errorf("%v and %v differ by %.2f in grey", pair[0], pair[1], d)
		}
	}
	d, st := inventedSearch(), newStyle(80)
	for i, draw := range []func(*style) (*page, Figure){d.bestFigure, d.progressFigure, d.profileFigure, d.matterFigure, d.tradeFigure} {
		p, f := draw(st)
		var b bytes.Buffer
		if err := p.writeTo(&b); err != nil {
			t.Fatal(err)
		}
		img, err := png.Decode(&b)
		if err != nil {
			t.Fatal(err)
		}
		area, ink := p.pixels(p.body), 0
		for y := area.Min.Y; y < area.Max.Y; y++ {
			for x := area.Min.X; x < area.Max.X; x++ {
				if r, g, bl, _ := img.At(x, y).RGBA(); min(r, g, bl) < 0x9000 {
					ink++
				}
			}
		}
		if ink < 200 || f.Name == "" || !strings.HasSuffix(f.Alt, f.Finding) {
			t.Errorf("figure %d, %s: %d dark pixels, alt %q", i, f.Name, ink, f.Alt)
		}
	}
}

func TestSettingNumber(t *testing.T) {
	for cell, want := range map[string]float64{"07:30": 7.5, "121.75": 121.75, "-3": -3, "0": 0} {
		if got := settingNumber(cell); got != want {
			t.Errorf("%s: %v, want %v", cell, got, want)
		}
	}
	for _, cell := range []string{"", "x", "A 121, B 122", "a:b"} {
		if got := settingNumber(cell); !math.IsNaN(got) {
			t.Errorf("%q: %v, want none", cell, got)
		}
	}
}
