//go:build darwin || dragonfly || freebsd || linux || netbsd || openbsd

package results

import (
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// writeForeverAt is the environment variable that turns this test program into a run
// that writes until it is killed.
const writeForeverAt = "RESULTS_TEST_WRITE_FOREVER_AT"

func TestMain(m *testing.M) {
	if dir := os.Getenv(writeForeverAt); dir != "" {
		writeForever(dir)
	}
	os.Exit(m.Run())
}

func writeForever(dir string) {
	x := newTiny(&testing.B{}, time.Unix(0, 0).UTC(), time.Unix(1<<32, 0).UTC(), time.Hour)
	x.plan.Settings.Run.Voltages = "all"
	w, err := Create(dir, x.plan)
	if err != nil {
		fmt.Println(err)
		os.Exit(1)
	}
	fmt.Println("writing")
	st := x.state(nil, [3]int{}, true)
	for at := int64(0); ; at += hour {
		if err := w.Interval(&Interval{Start: at, End: at + hour, Settled: true, State: st}); err != nil {
			os.Exit(1)
		}
		if err := w.Step(&Step{Start: at, End: at + hour, Last: st}); err != nil {
			os.Exit(1)
		}
	}
}

func TestAKilledRunLeavesTheOldResults(t *testing.T) {
	parent, dir := oldResults(t)
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(self, "-test.run=^$")
	cmd.Env = append(os.Environ(), writeForeverAt+"="+dir)
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	var word string
	if _, err := fmt.Fscan(out, &word); err != nil || word != "writing" {
		t.Fatalf("the run says %q (%v)", word, err)
	}
	// Kill it in the middle: once it has handed some rows on.
	voltages := filepath.Join(parent, hiddenName(dir, "new")+"*", "voltages.csv")
	for {
		found, err := filepath.Glob(voltages)
		if err != nil || len(found) != 1 {
			t.Fatalf("the run's own files are %v (%v)", found, err)
		}
		if info, err := os.Stat(found[0]); err != nil {
			t.Fatal(err)
		} else if info.Size() > 0 {
			break
		}
	}
	x := aDay(t)
	other, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	if err := other.Abort(); err != nil {
		t.Fatal(err)
	}
	if found, _ := filepath.Glob(voltages); len(found) != 1 {
		t.Error("another run took away the folder of one that is still writing")
	}
	if err := cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	if err := cmd.Wait(); err == nil {
		t.Error("the killed run ended well")
	}
	wantOld(t, dir)
	if found, _ := filepath.Glob(voltages); len(found) != 1 {
		t.Error("the killed run left nothing behind: it was not killed in the middle")
	}
	constant(x, func(int) *State { return x.state(nil, [3]int{}, true) }).writeTo(t, x, dir)
	wantEntries(t, parent, "base")
	if _, err := os.Stat(filepath.Join(dir, "nodes.csv")); err != nil {
		t.Error(err)
	}
}
