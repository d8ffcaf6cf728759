package plots

import (
	"os"
	"testing"
)

func TestDrawsWhatTheWriterWrote(t *testing.T) {
	k := kept{}
	figs, err := Draw(os.DirFS("../sim/results/testdata/tiny"), k.out, Options{DPI: 60})
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range figs {
		t.Log(f.Name, f.Finding)
	}
	if d := os.Getenv("PLOTS_LOOK"); d != "" {
		os.MkdirAll(d+"/tiny", 0o755)
		k = kept{}
		Draw(os.DirFS("../sim/results/testdata/tiny"), k.out, Options{})
		for n, b := range k {
			os.WriteFile(d+"/tiny/"+n, b.Bytes(), 0o644)
		}
	}
}
