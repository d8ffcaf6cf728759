//go:build browser

package plots

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// These tests want Chromium and poppler (apt-get install chromium poppler-utils):
//
//	go test -tags browser ./plots -run Browser
//
// With -look DIR they keep what they drew, to be looked at.

// chromium runs a headless browser on a page and returns what it said on its standard
// error.
func chromium(t *testing.T, page string, args ...string) (out, said string) {
	t.Helper()
	args = append([]string{"--headless=new", "--no-sandbox", "--disable-gpu", "--hide-scrollbars", "--user-data-dir=" + t.TempDir(), "--enable-logging=stderr", "--v=0"}, args...)
	cmd := exec.Command("chromium", append(args, "file://"+page)...)
	cmd.WaitDelay = time.Minute
	var stdout, stderr bytes.Buffer
	cmd.Stdout, cmd.Stderr = &stdout, &stderr
	if err := cmd.Run(); err != nil {
		t.Fatalf("chromium %v: %v\n%s", args, err, stderr.String())
	}
	return stdout.String(), stderr.String()
}

// writePage writes a page; script, which no report has, asks the browser about it.
func writePage(t *testing.T, dir, name, page, script string) string {
	t.Helper()
	path := filepath.Join(dir, name)
	if script != "" {
		page = strings.Replace(page, "</body>", "<script>"+script+"</script></body>", 1)
	}
	if err := os.WriteFile(path, []byte(page), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func browserFolder(t *testing.T) string {
	t.Helper()
	if *look == "" {
		return t.TempDir()
	}
	dir, err := filepath.Abs(filepath.Join(*look, "report"))
	if err != nil {
		t.Fatal(err)
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	return dir
}

// Every document opens and prints.
func TestBrowserTakesEveryDocument(t *testing.T) {
	for name, page := range everyDocument(t) {
		t.Run(name+" opens", func(t *testing.T) { opensInBrowser(t, name, page) })
		t.Run(name+" prints", func(t *testing.T) { printsFromBrowser(t, name, page) })
	}
}

// opensInBrowser wants no error on the console, and nothing wider than the window but a
// table, which scrolls by itself.
func opensInBrowser(t *testing.T, name, page string) {
	dir := browserFolder(t)
	plain := writePage(t, dir, name+".html", page, "")
	// The window of a browser may not be narrower than some 500 pixels: a frame is.
	const ask = `const f = document.getElementsByTagName("iframe"); const d = [];
for (const x of f) { const r = x.contentDocument.documentElement; d.push(x.width + ":" + r.scrollWidth + ":" + [...x.contentDocument.images].filter(i => !i.complete || !i.naturalWidth).length); }
document.title = "asked"; document.body.textContent = d.join(" ");`
	frames := strings.ReplaceAll(`<!DOCTYPE html><html lang="en"><body><iframe width="390" height="800" src="PAGE"></iframe><iframe width="768" height="800" src="PAGE"></iframe><iframe width="1280" height="800" src="PAGE"></iframe></body></html>`, "PAGE", name+".html")
	asking := writePage(t, dir, name+"-frames.html", frames, `onload = () => {`+ask+`}`)
	out, said := chromium(t, asking, "--allow-file-access-from-files", "--virtual-time-budget=8000", "--dump-dom")
	for _, width := range []int{390, 768, 1280} {
		if want := fmt.Sprintf("%d:%[1]d:0", width); !strings.Contains(out, want) {
			t.Errorf("the page of %d pixels is wider, or a picture is missing: want %s in %s", width, want, out)
		}
	}
	for _, width := range []int{390, 1280} {
		shot := filepath.Join(dir, fmt.Sprintf("%s-%d.png", name, width))
		_, more := chromium(t, plain, fmt.Sprintf("--window-size=%d,9000", width), "--screenshot="+shot)
		said += more
		if info, err := os.Stat(shot); err != nil || info.Size() < 10_000 {
			t.Errorf("no screenshot of %d pixels: %v", width, err)
		}
	}
	if strings.Contains(said, "CONSOLE") {
		t.Errorf("the console says:\n%s", said)
	}
}

// printsFromBrowser wants no empty page, a number on every page, and the case on those of
// a run.
func printsFromBrowser(t *testing.T, document, page string) {
	dir := browserFolder(t)
	for name, size := range map[string]string{"a4": "A4", "letter": "Letter"} {
		// The paper of a headless printer is Letter unless the page says otherwise.
		name = document + "-" + name
		path := writePage(t, dir, name+".html", strings.Replace(page, "</style>", "@page { size: "+size+"; }</style>", 1), "")
		pdf := filepath.Join(dir, name+".pdf")
		chromium(t, path, "--no-pdf-header-footer", "--print-to-pdf="+pdf)
		text, err := exec.Command("pdftotext", "-layout", pdf, "-").Output()
		if err != nil {
			t.Fatalf("pdftotext: %v", err)
		}
		pages := strings.Split(strings.TrimSuffix(string(text), "\f"), "\f")
		if len(pages) < 3 || len(pages) > 40 {
			t.Errorf("%s: %d pages", size, len(pages))
		}
		for i, p := range pages {
			if document == "report" && !strings.Contains(p, "case base") {
				t.Errorf("%s: page %d does not name the case", size, i+1)
			}
			if words := strings.Fields(p); len(words) < 10 {
				t.Errorf("%s: page %d holds nothing but %q", size, i+1, words)
			}
			if !strings.Contains(strings.ReplaceAll(p, " / ", "/"), fmt.Sprintf("%d/%d", i+1, len(pages))) {
				t.Errorf("%s: page %d has no foot", size, i+1)
			}
		}
		if !strings.Contains(pages[0]+pages[1], "What is not studied") {
			t.Errorf("%s: the first two pages do not say what is not studied", size)
		}
	}
}
