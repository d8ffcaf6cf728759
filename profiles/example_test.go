package profiles_test

import (
	"fmt"
	"testing/fstest"
	"time"
	_ "time/tzdata"

	"yearflow/profiles"
)

// A day by the hour, sampled by steps of six hours on the day of 23 hours.
func Example() {
	denver, err := time.LoadLocation("America/Denver")
	if err != nil {
		fmt.Println(err)
		return
	}
	file := "time,houses [pu]\n"
	for h := range 24 {
		file += fmt.Sprintf("2025-03-03T%02d:00,%d\n", h, h)
	}
	study := fstest.MapFS{"profiles/houses.csv": {Data: []byte(file)}}
	set, err := profiles.Open(study, []profiles.Block{{Files: []string{"profiles/*.csv"}, Zone: denver, Repeat: "day"}})
	if err != nil {
		fmt.Println(err)
		return
	}
	houses, _ := set.Lookup("houses")

	start, _ := profiles.ParseTime("2025-03-09", denver)
	end, _ := profiles.ParseTime("2025-03-10", denver)
	axis := profiles.Axis{Start: start, End: end, Step: int64(6 * time.Hour), Zone: denver}
	sampler, err := profiles.NewSampler(axis, []*profiles.Series{houses})
	if err != nil {
		fmt.Println(err)
		return
	}
	values := make([]float64, 1)
	for i := range axis.Steps() {
		from, _ := axis.Bounds(i)
		sampler.Step(values, i)
		fmt.Printf("%s %.3f\n", profiles.Format(from, denver), values[0])
	}
	// Output:
	// 2025-03-09T00:00:00-07:00 3.167
	// 2025-03-09T07:00:00-06:00 9.500
	// 2025-03-09T13:00:00-06:00 15.500
	// 2025-03-09T19:00:00-06:00 21.000
}
