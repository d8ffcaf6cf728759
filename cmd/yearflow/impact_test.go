package main

import (
	"os"
	"strings"
	"testing"
)

// impact and hosting from the command line: what is missing is said with what would do
// instead, and leaves no folder behind.
func TestImpactAndHostingAsk(t *testing.T) {
	t.Chdir(t.TempDir())
	smallStudy(t)
	for _, x := range []struct{ args, want string }{
		{"impact", "--case NAME"},
		{"impact --case base", "generators.csv"},
		{"impact --case nothere", "no case \"nothere\""},
		{"hosting", "[hosting] profile"},
	} {
		_, errs := must(t, exitInput, strings.Fields(x.args)...)
		contains(t, errs, x.want)
	}
	if err := os.MkdirAll("cases/other", 0o755); err != nil {
		t.Fatal(err)
	}
	write(t, "cases/other/case.toml", "title = \"a case that adds nothing\"\n")
	_, errs := must(t, exitInput, "impact", "--case", "other")
	contains(t, errs, "adds no generator or battery", "cases/other/generators.csv")
	for _, dir := range []string{"results/impact-other", "results/hosting"} {
		if _, err := os.Stat(dir); err == nil {
			t.Errorf("%s is there", dir)
		}
	}
}
