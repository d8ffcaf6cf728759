package main

import (
	"bytes"
	"context"
	"os"
	"os/signal"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// asProgram makes the test binary be the program, so that a test can start it as a
// process of its own.
const asProgram = "YEARFLOW_TEST_AS_PROGRAM"

func TestMain(m *testing.M) {
	if os.Getenv(asProgram) != "" {
		ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
		code := run(ctx, os.Args[1:], os.Stdout, os.Stderr)
		stop()
		os.Exit(code)
	}
	os.Exit(m.Run())
}

// command runs the program in-process.
func command(t testing.TB, args ...string) (code int, out, errs string) {
	t.Helper()
	var o, e bytes.Buffer
	code = run(t.Context(), args, &o, &e)
	t.Logf("yearflow %s: exit status %d\n%s", strings.Join(args, " "), code, e.String())
	return code, o.String(), e.String()
}

// must runs the program and wants an exit status.
func must(t testing.TB, want int, args ...string) (out, errs string) {
	t.Helper()
	code, out, errs := command(t, args...)
	if code != want {
		t.Fatalf("yearflow %s: exit status %d, want %d", strings.Join(args, " "), code, want)
	}
	return out, errs
}

// contains wants every part in a text.
func contains(t testing.TB, text string, parts ...string) {
	t.Helper()
	for _, p := range parts {
		if !strings.Contains(text, p) {
			t.Errorf("%q is missing in:\n%s", p, text)
		}
	}
}

// fromReadme writes the example of README.md into a new folder and goes there: every
// file stands there as a line with its name between backquotes and a fenced block.
func fromReadme(t testing.TB, dir string) {
	t.Helper()
	data, err := os.ReadFile(readme)
	if err != nil {
		t.Fatal(err)
	}
	blocks := regexp.MustCompile("(?m)^`([a-z/-]+\\.(?:toml|csv))`\n\n```(?:toml|csv)\n((?s:.*?))```$").FindAllSubmatch(data, -1)
	if len(blocks) < 10 {
		t.Fatalf("%d files of the example in README.md, want ten or more", len(blocks))
	}
	for _, b := range blocks {
		write(t, filepath.Join(dir, filepath.FromSlash(string(b[1]))), string(b[2]))
	}
}

// readme is found before a test goes elsewhere.
var readme = func() string {
	p, err := filepath.Abs("../../README.md")
	if err != nil {
		panic(err)
	}
	return p
}()

func write(t testing.TB, name, text string) {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(name), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}

func read(t testing.TB, name string) string {
	t.Helper()
	data, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	return string(data)
}

// edit replaces a text in a file.
func edit(t testing.TB, name, old, new string) {
	t.Helper()
	text := read(t, name)
	if !strings.Contains(text, old) {
		t.Fatalf("%s does not hold %q", name, old)
	}
	write(t, name, strings.Replace(text, old, new, 1))
}

// smallStudy is the example of README.md, shortened to two days, as the current folder.
func smallStudy(t testing.TB) {
	t.Helper()
	dir := t.TempDir()
	t.(interface{ Chdir(string) }).Chdir(dir)
	fromReadme(t, dir)
	edit(t, "study.toml", "end = 2025-07-08", "end = 2025-07-03")
	edit(t, "study.toml", `"15min"`, `"1h"`)
}

// entries lists a folder.
func entries(t testing.TB, dir string) (names []string) {
	t.Helper()
	es, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range es {
		names = append(names, e.Name())
	}
	return names
}
