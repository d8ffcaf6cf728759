package study_test

import (
	"context"
	"strings"
	"testing"

	"yearflow/plots"
	"yearflow/sim/study"
)

// told tells whether one of the cautions says something.
func told(cautions []string, what string) bool {
	for _, c := range cautions {
		if strings.Contains(c, what) {
			return true
		}
	}
	return false
}

// A single step makes all three documents, and they say that it is one.
func TestDocumentsOfASingleStep(t *testing.T) {
	files := smallFeeder("[hosting]\nprofile = \"sun\"\nplaces = [\"end\"]\ngrid = [500, 1000]\nruns = 3\n")
	files["study.toml"] = strings.NewReplacer("start = 2025-06-01", "start = 2025-06-01T12:00", "end = 2025-06-03", "end = 2025-06-01T13:00").Replace(files["study.toml"])
	files["cases/g/generators.csv"] = "generator,node,phases,kind,rating [kVA],profile\nG,end,ABC,solar,800,sun\n"
	p := folder(t, nil, files)
	im, err := impactOf(t, p, "g", 1)
	if err != nil {
		t.Fatal(err)
	}
	if !told(im.Cautions, "single step") {
		t.Errorf("impact does not say that it is of one step: %q", im.Cautions)
	}
	h, err := host(t, p, 1)
	if err != nil {
		t.Fatal(err)
	}
	if !told(h.Cautions, "single step") || !told(h.Cautions, "power factor of 1") {
		t.Errorf("hosting's cautions: %q", h.Cautions)
	}
	l, err := study.Losses(context.Background(), p, study.LossSettings{})
	if err != nil {
		t.Fatal(err)
	}
	var texts []string
	for _, c := range l.Cautions {
		texts = append(texts, c.Text)
	}
	if !told(texts, "single step") || !told(texts, "No money") {
		t.Errorf("losses' cautions: %q", texts)
	}
	dir := t.TempDir() + "/losses"
	if err := l.Write(dir, p, document(t, "losses.html", plots.LossesDocument)); err != nil {
		t.Error(err)
	}
}

// A case that leaves steps without a solution makes the report that is still true: the
// steps fail as a criterion, and that base and case are over different times is said, of
// the remedies too.
func TestImpactOfACaseWithoutSolutions(t *testing.T) {
	files := smallFeeder("")
	files["cases/huge/generators.csv"] = "generator,node,phases,kind,rating [kVA],profile\nG,end,ABC,solar,90000,sun\n"
	im, err := impactOf(t, folder(t, nil, files), "huge", 2)
	if err != nil {
		t.Fatal(err)
	}
	failed := false
	for _, c := range im.Criteria {
		failed = failed || c.Name == "low or unsolved steps" && c.Verdict == study.Fails && c.With > 0
	}
	if !failed {
		t.Error("no criterion fails for the steps without a solution")
	}
	for _, want := range []string{"steps are low or unsolved", "with the units than in the base", "remedy volt-var: other steps"} {
		if !told(im.Cautions, want) {
			t.Errorf("no caution says %q: %q", want, im.Cautions)
		}
	}
}
