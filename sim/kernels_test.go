package sim_test

import (
	"bytes"
	"crypto/sha256"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/powerflow/vector"
)

// kernelEnv makes the test binary a run that prints what it wrote.
const kernelEnv = "YEARFLOW_TEST_KERNELS"

// The bytes of all files are the same whatever the processor can do: with every kernel that
// this one has, in a process of its own, told by the GODEBUG of package cpu to do without.
func TestKernelsWriteTheSameBytes(t *testing.T) {
	if os.Getenv(kernelEnv) != "" {
		printKernel(t)
		return
	}
	outputs, kernels := map[string][]byte{}, []string{}
	for _, off := range []string{"", "cpu.avx512f=off", "cpu.avx512f=off,cpu.avx2=off"} {
		cmd := exec.Command(os.Args[0], "-test.run=^TestKernelsWriteTheSameBytes$")
		cmd.Env = append(slices.DeleteFunc(os.Environ(), func(s string) bool { return strings.HasPrefix(s, "GODEBUG=") }), kernelEnv+"=1", "GODEBUG="+off)
		out, err := cmd.CombinedOutput()
		if err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		begin := bytes.Index(out, []byte("kernel "))
		if begin < 0 {
			t.Fatalf("no output:\n%s", out)
		}
		name, rest, _ := bytes.Cut(out[begin:], []byte("\n"))
		rest, _, _ = bytes.Cut(rest, []byte("end\n"))
		if n := bytes.Count(rest, []byte("\n")); n < 40 {
			t.Fatalf("%d files:\n%s", n, out)
		}
		outputs[string(name)] = rest
		kernels = append(kernels, string(name))
	}
	for _, name := range kernels[1:] {
		if !bytes.Equal(outputs[name], outputs[kernels[0]]) {
			t.Errorf("%s wrote\n%s%s wrote\n%s", name, outputs[name], kernels[0], outputs[kernels[0]])
		}
	}
	t.Log(kernels)
}

func printKernel(t *testing.T) {
	fmt.Println("kernel", vector.Kernel())
	studies := []fs.FS{shortened(t, laid(demo.Study()), "2025-06-25", "2025-07-05")}
	for _, seed := range []uint64{0, 1, 4, 8, 42} {
		studies = append(studies, wild(seed))
	}
	for i, study := range studies {
		dir := folderOf(t, study, sim.Options{})
		names, err := filepath.Glob(filepath.Join(dir, "*.*"))
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range names {
			data, err := os.ReadFile(name)
			if err != nil {
				t.Fatal(err)
			}
			if filepath.Base(name) != "timing.json" {
				fmt.Printf("%d %s %x\n", i, filepath.Base(name), sha256.Sum256(data))
			}
		}
	}
	fmt.Println("end")
}
