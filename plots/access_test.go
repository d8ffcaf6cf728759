package plots

import (
	"bytes"
	"context"
	"image/color"
	"io/fs"
	"math"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/study"
)

// twoDays is the demo with two days for its period and little to host.
func twoDays(t *testing.T) study.Place {
	t.Helper()
	files := fstest.MapFS{}
	err := fs.WalkDir(demo.Study(), ".", func(name string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		data, err := fs.ReadFile(demo.Study(), name)
		if name == "study.toml" {
			data = bytes.Replace(data, []byte("start = 2025-01-01\nend = 2026-01-01"), []byte("start = 2025-07-01\nend = 2025-07-03"), 1)
			data = append(data, "\n[hosting]\nplaces = [\"M12\"]\ngrid = [500, 1000]\nruns = 2\nlevels = 2\n"...)
		}
		files[name] = &fstest.MapFile{Data: data}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return study.Place{FS: files, Results: t.TempDir(), Demo: true, Version: "test"}
}

// everyDocument makes each of the program's documents from the demo's two days.
func everyDocument(t *testing.T) map[string]string {
	t.Helper()
	p, ctx, pages := twoDays(t), context.Background(), map[string]string{}
	must := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	// drawn takes the page of a document and what it says about its folder.
	drawn := func(name string, make func(dir string) (*Document, error)) (string, func(dir string) error) {
		return filepath.Join(p.Results, name), func(dir string) error {
			d, err := make(dir)
			if err != nil {
				return err
			}
			var page bytes.Buffer
			err = d.Write(&page)
			pages[name] = page.String()
			return err
		}
	}
	run := func(names ...string) ([]*study.Case, []study.LeftOut) {
		studies, left, err := study.Choose(p, names)
		must(err)
		cases, err := study.Run(ctx, p, studies, study.Settings{})
		must(err)
		return cases, left
	}
	cases, left := run("smart-inverters", "lower-band")
	compared, err := study.Compare(cases, left)
	must(err)
	dir, draw := drawn("compare", CompareDocument)
	must(compared.Write(dir, p, draw))
	lost, err := study.Losses(ctx, p, study.LossSettings{Case: "lower-band", Samples: 4})
	must(err)
	dir, draw = drawn("losses", LossesDocument)
	must(lost.Write(dir, p, draw))
	cases, _ = run("more-solar")
	impact, err := study.MakeImpact(ctx, p, cases, study.ImpactSettings{})
	must(err)
	dir, draw = drawn("impact", func(d string) (*Document, error) { return ImpactDocument(d, p.Results) })
	must(impact.Write(dir, p, draw))
	cases, _ = run(feeder.Base)
	hosted, err := study.MakeHosting(ctx, p, cases[0], study.HostingSettings{})
	must(err)
	dir, draw = drawn("hosting", func(d string) (*Document, error) { return HostingDocument(d, p.Results) })
	must(hosted.Write(dir, p, draw))
	tuned, err := study.Tune(ctx, p, study.TuneSettings{Budget: 12, Log: filepath.Join(t.TempDir(), "log.csv")})
	must(err)
	dir, draw = drawn("tune", TuneDocument)
	must(tuned.Write(dir, p, draw))
	pages["report"] = reportFrom(t, small().write(), true)
	return pages
}

// picturesWithoutText lists the pictures of a page that say nothing to those who do not
// see them, and how many pictures there are.
func picturesWithoutText(page string) (silent []string, all int) {
	page = regexp.MustCompile(`base64,[^"]*`).ReplaceAllString(page, "base64,")
	for _, tag := range regexp.MustCompile(`<(?:img|svg)\b[^>]*>`).FindAllString(page, -1) {
		all++
		label := regexp.MustCompile(`\s(?:alt|aria-label)="\s*[^"\s][^"]*"`)
		if !label.MatchString(tag) {
			silent = append(silent, tag)
		}
	}
	return silent, all
}

// Every picture of every document has a text for those who do not see it, and all text
// reads on its ground: W3C, Web Content Accessibility Guidelines (WCAG) 2.1, success
// criteria 1.1.1 and 1.4.3 (4.5 to 1).
func TestEveryDocumentIsReadByEverybody(t *testing.T) {
	pages := everyDocument(t)
	for name, least := range map[string]int{"report": 8, "compare": 1, "losses": 2, "impact": 4, "hosting": 2, "tune": 1} {
		page := pages[name]
		wellFormed(t, page)
		silent, all := picturesWithoutText(page)
		for _, tag := range silent {
			t.Errorf("%s: a picture without a text: %.120s", name, tag)
		}
		if all < least {
			t.Errorf("%s: %d pictures, want %d or more", name, all, least)
		}
		faint, held := faintText(t, page)
		for _, text := range faint {
			t.Errorf("%s: %s", name, text)
		}
		if held < 15 {
			t.Errorf("%s: %d pairs of colours were held against each other, want 15 or more", name, held)
		}
	}
}

func TestPicturesWithoutTextAreSeen(t *testing.T) {
	silent, all := picturesWithoutText(`<img alt="a map" src="x"><img src="x"><img alt="" src="x"><img src="x" alt=" "><svg role="img" aria-label="bars"><svg>`)
	if len(silent) != 4 || all != 6 {
		t.Errorf("%d of %d pictures are without a text, want 4 of 6: %q", len(silent), all, silent)
	}
}

// faintText holds every colour of text in a page's style sheet against every ground that
// the sheet gives, and returns what is below 4.5 to 1 and how many pairs were held.
func faintText(t *testing.T, page string) (faint []string, held int) {
	t.Helper()
	_, sheet, _ := strings.Cut(page, "<style>")
	sheet, _, _ = strings.Cut(sheet, "</style>")
	names := map[string]string{}
	for _, m := range regexp.MustCompile(`(--[a-z]+):\s*(#[0-9a-fA-F]+)`).FindAllStringSubmatch(sheet, -1) {
		names[m[1]] = m[2]
	}
	colours := func(property string) (out []string) {
		seen := map[string]bool{}
		for _, m := range regexp.MustCompile(`[{;\s]`+property+`:\s*(#[0-9a-fA-F]+|var\((--[a-z]+)\)|[a-z]+)`).FindAllStringSubmatch(sheet, -1) {
			c := m[1]
			if m[2] != "" {
				c = names[m[2]]
			}
			if c == "inherit" || seen[c] {
				continue
			}
			seen[c] = true
			out = append(out, c)
		}
		return out
	}
	for _, ground := range colours("background") {
		for _, text := range colours("color") {
			held++
			if r := contrast(hexColour(t, text), hexColour(t, ground)); r < textContrast {
				faint = append(faint, text+" on "+ground+" has a contrast of "+strconv.FormatFloat(r, 'f', 2, 64)+", want 4.5")
			}
		}
	}
	return faint, held
}

// hexColour reads #rgb or #rrggbb.
func hexColour(t *testing.T, text string) color.NRGBA {
	t.Helper()
	digits := strings.TrimPrefix(text, "#")
	if len(digits) == 3 {
		digits = string([]byte{digits[0], digits[0], digits[1], digits[1], digits[2], digits[2]})
	}
	n, err := strconv.ParseUint(digits, 16, 32)
	if err != nil || len(digits) != 6 || !strings.HasPrefix(text, "#") {
		t.Fatalf("%q is no colour that this test reads: write it as #rrggbb", text)
	}
	return color.NRGBA{uint8(n >> 16), uint8(n >> 8), uint8(n), 0xff}
}

func TestFaintTextIsSeen(t *testing.T) {
	faint, held := faintText(t, `<style>:root { --a: #777777; } body { color: var(--a); background: #fff; } p { color: #000; border-color: #eeeeee; }</style>`)
	if held != 2 || len(faint) != 1 || !strings.HasPrefix(faint[0], "#777777 on #fff has a contrast of 4.48") {
		t.Errorf("%d pairs, faint %q", held, faint)
	}
}

// Black on white is 21 to 1 and equal colours 1 to 1 by the definition of W3C, WCAG 2.1.
// #767676 is the lightest grey that passes on white, as is often told (recalled from
// memory); red on white comes from the definition by hand: (1 + 0.05)/(0.2126 + 0.05).
func TestContrastRatio(t *testing.T) {
	for _, x := range []struct {
		a, b string
		want float64
	}{{"#000000", "#ffffff", 21}, {"#ffffff", "#000000", 21}, {"#123456", "#123456", 1}, {"#767676", "#ffffff", 4.54}, {"#777777", "#ffffff", 4.48}, {"#ff0000", "#ffffff", 1.05 / 0.2626}} {
		if got := contrast(hexColour(t, x.a), hexColour(t, x.b)); math.Abs(got-x.want) > 0.005 {
			t.Errorf("%s on %s: %.4f, want %.2f", x.a, x.b, got, x.want)
		}
	}
}

// The words of figures read on white and on the shading of ranges, and the numbers in the
// cells of a chart on every shade of it.
func TestWordsOfFiguresStandOut(t *testing.T) {
	for _, ground := range []color.NRGBA{white, outsideA, outsideB} {
		for _, ink := range []color.NRGBA{black, inkGrey} {
			if r := contrast(ink, ground); r < textContrast {
				t.Errorf("%v on %v has a contrast of %.2f", ink, ground, r)
			}
		}
	}
	for x := 0.0; x <= 1; x += 1.0 / 256 {
		for _, from := range []color.NRGBA{blue, vermilion, green, purple} {
			ground := mix(white, from, x)
			if r := contrast(inkOn(ground), ground); r < textContrast {
				t.Errorf("%v on %v has a contrast of %.2f", inkOn(ground), ground, r)
			}
		}
	}
}
