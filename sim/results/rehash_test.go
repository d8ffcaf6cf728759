package results

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// A figure that is drawn later is hashed as one drawn with the run, and nothing else
// of run.json changes.
func TestRehash(t *testing.T) {
	dir := goldenRun(t)
	path := filepath.Join(dir, "run.json")
	before, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "report.html"), []byte("<p>"), 0o644); err != nil {
		t.Fatal(err)
	}
	for range 2 { // the second time nothing changes
		if err := Rehash(dir, []string{"report.html"}); err != nil {
			t.Fatal(err)
		}
	}
	after, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var was, is map[string]any
	if json.Unmarshal(before, &was) != nil || json.Unmarshal(after, &is) != nil {
		t.Fatal("run.json does not read")
	}
	sum := sha256.Sum256([]byte("<p>"))
	hashes := is["results_sha256"].(map[string]any)
	if got, want := hashes["report.html"], hex.EncodeToString(sum[:]); got != want {
		t.Errorf("report.html is hashed as %v, want %v", got, want)
	}
	line := `    "report.html": "` + hex.EncodeToString(sum[:]) + "\",\n"
	if cut := strings.Replace(string(after), line, "", 1); cut != string(before) {
		t.Errorf("run.json changed elsewhere:\n%s\nwas\n%s", after, before)
	}
	if n, _ := filepath.Glob(filepath.Join(dir, ".run-*")); len(n) > 0 {
		t.Errorf("%v is left over", n)
	}
}

func TestRehashOfAnotherFile(t *testing.T) {
	dir := t.TempDir()
	for _, text := range []string{"{}\n", "{\n  \"results_sha256\": 3\n}\n"} {
		if err := os.WriteFile(filepath.Join(dir, "run.json"), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		if err := Rehash(dir, nil); err == nil || !strings.Contains(err.Error(), "run.json") {
			t.Errorf("%q gives %v, want an error that names run.json", text, err)
		}
		if got, err := os.ReadFile(filepath.Join(dir, "run.json")); err != nil || !bytes.Equal(got, []byte(text)) {
			t.Errorf("run.json is now %q (%v)", got, err)
		}
	}
	if err := Rehash(t.TempDir(), nil); err == nil {
		t.Error("a folder without run.json gives no error")
	}
}
