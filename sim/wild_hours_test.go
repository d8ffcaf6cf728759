package sim_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"os"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
)

// wildHours are times at which a wild study runs in long steps: over changes of the clocks,
// in zones of half an hour, over ends of months and years, in periods of one step, of two
// and of a part of one.
var wildHours = []wildTime{
	{"America/Denver", "2025-03-07", "2025-03-12", "1h", "step"},
	{"UTC", "2024-12-25", "2025-01-08", "2h", "step"},
	{"Australia/Lord_Howe", "2025-04-04", "2025-04-09", "30min", "90min"},
	{"America/St_Johns", "2009-10-30", "2009-11-03", "1h", "step"},
	{"Asia/Kathmandu", "2025-05-29", "2025-06-04", "1h", "4h"},
	{"America/Denver", "2025-02-20", "2025-04-20", "24h", "step"},
	{"UTC", "2025-02-26T13:20:00", "2025-03-03T06:50:00", "1h", "step"},
	{"Australia/Lord_Howe", "2025-10-03", "2025-10-08", "45min", "step"},
	{"UTC", "2025-01-31T23:00:00", "2025-02-01", "1h", "step"},
	{"UTC", "2025-01-31T23:00:00", "2025-02-01T00:10:00", "1h", "step"},
	{"America/Denver", "2025-10-30", "2025-11-04", "3h", "step"},
	{"UTC", "2025-01-10", "2025-05-10", "8h", "step"},
}

// wildHour is a wild study by the hour, without functions: those are not foreseen.
func wildHour(seed uint64) fstest.MapFS {
	f := wild(seed)
	r := rand.New(rand.NewPCG(seed, 9))
	old, when := wildTimes[int(seed)%len(wildTimes)], wildHours[int(seed/3)%len(wildHours)]
	toml := string(f["study.toml"].Data)
	log := ""
	if when.log != "step" {
		log = fmt.Sprintf("log = %q\n", when.log)
	}
	toml = strings.Replace(toml, fmt.Sprintf("log = %q\n", old.log), "", 1)
	toml = strings.Replace(toml, fmt.Sprintf("start = %s\nend = %s\nstep = %q\nzone = %q\n", old.start, old.end, old.step, old.zone),
		fmt.Sprintf("start = %s\nend = %s\nstep = %q\nzone = %q\n", when.start, when.end, when.step, when.zone), 1)
	f["study.toml"] = text(strings.Replace(toml, "[limits]", log+"[limits]", 1))
	f["feeder/generators.csv"] = text(strings.ReplaceAll(string(f["feeder/generators.csv"].Data), ",f\n", ",\n"))
	delete(f, "feeder/inverter-functions.csv")
	if r.IntN(2) == 0 { // delays of minutes to hours: requests stand over steps
		rows := strings.Split(strings.TrimSpace(string(f["feeder/regulator-settings.csv"].Data)), "\n")
		for i, row := range rows[1:] {
			cells := strings.Split(row, ",")
			cells[4] = fmt.Sprintf("%.6f", 30+7200*r.Float64())
			if r.IntN(2) == 0 {
				cells[5] = fmt.Sprintf("%.6f", 1+3600*r.Float64())
			}
			rows[i+1] = strings.Join(cells, ",")
		}
		f["feeder/regulator-settings.csv"] = text(strings.Join(rows, "\n") + "\n")
	}
	return f
}

// By the hour both paths agree on wild studies, in memory and in every file, and the bytes
// depend neither on the number of cores nor on what the engine ran before.
func TestBothPathsAgreeOnWildHours(t *testing.T) {
	seeds := []uint64{}
	for seed := range uint64(24) {
		if !testing.Short() || seed < 6 {
			seeds = append(seeds, seed)
		}
	}
	if first, err := strconv.ParseUint(os.Getenv("WILD"), 10, 64); err == nil { // to look for more
		seeds = seeds[:0]
		for k := range uint64(1000) {
			seeds = append(seeds, first+k)
		}
	}
	foreseen := 0
	for _, seed := range seeds {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			study := wildHour(seed)
			_, fast := sameRun(t, study, "")
			foreseen += fast.Speed.LanesUsed
			got := folderOf(t, study, sim.Options{})
			sameFiles(t, folderOf(t, study, sim.Options{Reference: true}), got, true)
			again := &trail{}
			e := prepare(t, study, "", sim.Options{})
			for range 2 {
				last := *again
				*again = trail{}
				if _, err := e.Run(context.Background(), again); err != nil {
					t.Fatal(err)
				}
				for k := range last.v {
					for u, v := range last.v[k] {
						if again.v[k][u] != v {
							t.Fatalf("step %d is %v, the first time %v", k, again.v[k][u], v)
						}
					}
				}
				if _, err := e.Solve(e.Steps()-1, sim.Positions{}); err != nil {
					t.Fatal(err)
				}
			}
			defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(1))
			sameBytes(t, folderOf(t, study, sim.Options{}), got)
		})
	}
	if foreseen == 0 {
		t.Error("no step was foreseen")
	}
}
