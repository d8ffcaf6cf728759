// Generate writes a synthetic feeder as a study:
//
//	go run ./sim/synthetic/generate -size S -days 7 -step 1m DIR
//
// DIR must not exist or be empty.
package main

import (
	"errors"
	"flag"
	"fmt"
	"io"
	"io/fs"
	"os"
	"strings"
	"time"

	"yearflow/sim/synthetic"
)

func main() {
	if err := run(os.Args[1:], os.Stderr); err != nil && !errors.Is(err, flag.ErrHelp) {
		fmt.Fprintln(os.Stderr, "generate:", err)
		os.Exit(1)
	}
}

// kinds are what -inputs takes.
var kinds = []synthetic.Inputs{synthetic.Minutes, synthetic.HeldMinutes, synthetic.Hours, synthetic.Seconds}

func run(args []string, stderr io.Writer) error {
	f := flag.NewFlagSet("generate", flag.ContinueOnError)
	f.SetOutput(stderr)
	size := f.String("size", "S", "S, M or L: about 280, 2,200 or 22,000 node.phases")
	days := f.Int("days", 1, "days of the period")
	step := f.Duration("step", time.Minute, "step of the study")
	seed := f.Uint64("seed", 1, "seed of the feeder and its profiles")
	inputs := f.String("inputs", "minutes", `profiles by "minutes" (straight lines between), "held minutes", "hours" or "seconds"`)
	profileDays := f.Int("profile-days", 0, "days that the profiles cover, repeated over the period; 0: 1 by the second, 7 by the minute, all by the hour")
	if err := f.Parse(args); err != nil {
		return err
	}
	if f.NArg() != 1 {
		return fmt.Errorf("%d folders given; give one, behind the options", f.NArg())
	}
	o, err := synthetic.Sized(*size)
	if err != nil {
		return err
	}
	found := false
	var words []string
	for _, k := range kinds {
		words = append(words, k.String())
		if k.String() == *inputs {
			o.Inputs, found = k, true
		}
	}
	if !found {
		return fmt.Errorf("no inputs %q: %s would do", *inputs, strings.Join(words, ", "))
	}
	o.Days, o.Step, o.Seed, o.ProfileDays = *days, *step, *seed, *profileDays
	study, err := synthetic.Study(o)
	if err != nil {
		return err
	}
	return write(f.Arg(0), study)
}

// write copies the study into a folder that is empty or new.
func write(dir string, study fs.FS) error {
	if list, err := os.ReadDir(dir); err == nil && len(list) > 0 {
		return fmt.Errorf("%s is not empty", dir)
	} else if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return os.CopyFS(dir, study)
}
