package profiles_test

import (
	"fmt"
	"testing/fstest"
	"time"

	"yearflow/profiles"
)

// Hourly data of one meter with a missing hour: the gap is closed by a straight line
// and listed.
func ExampleOpenMeters() {
	study := fstest.MapFS{"meters/ami.csv": {Data: []byte(`time,meter,value [kWh]
2025-06-02T00:00,M-117,0.8
2025-06-02T01:00,M-117,0.6
2025-06-02T03:00,M-117,1.0
2025-06-02T04:00,M-117,1.1
`)}}
	zone, err := time.LoadLocation("America/Denver")
	if err != nil {
		fmt.Println(err)
		return
	}
	set, err := profiles.OpenMeters(study, []profiles.MeterBlock{{Files: []string{"meters/*.csv"}, Zone: zone}}, "", profiles.MeterRules{})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, m := range set.Mended {
		fmt.Printf("%s: %s, %s to %s, %d value, %+.1f kWh\n", m.Meter, m.Rule, profiles.Format(m.From, zone), profiles.Format(m.To, zone), m.Count, m.Energy)
	}
	m, _ := set.Lookup("M-117")
	fmt.Printf("%.1f kWh read, %.1f kWh now\n", m.Before, m.After)
	// Output:
	// M-117: gap, straight line, 2025-06-02T02:00:00-06:00 to 2025-06-02T03:00:00-06:00, 1 value, +0.8 kWh
	// 3.5 kWh read, 4.3 kWh now
}

// A load of which only the month's energy, the peak and the class are known.
func ExampleReconcile() {
	study := fstest.MapFS{"class.csv": {Data: []byte("time,homes [pu]\n2025-06-02T00:00,0.25\n2025-06-02T06:00,0.5\n2025-06-02T12:00,0.25\n2025-06-02T18:00,1\n")}}
	set, err := profiles.Open(study, []profiles.Block{{Files: []string{"class.csv"}, Repeat: "day"}})
	if err != nil {
		fmt.Println(err)
		return
	}
	homes, _ := set.Lookup("homes")
	from, to := homes.Span()
	axis := profiles.Axis{Start: from, End: to, Step: homes.StepLength()}
	p, err := profiles.Reconcile(homes, map[string]float64{"2025-06": 1440}, 4, axis)
	if err != nil {
		fmt.Println(err)
		return
	}
	energy := 0.0
	for k := range p.Len() {
		energy += p.Value(k) * 6
	}
	_, highest := p.Range()
	fmt.Printf("%.6f kWh in June, a peak of %g kW, the first day %.3f %.3f %.3f %.3f kW\n", energy, highest, p.Value(0), p.Value(1), p.Value(2), p.Value(3))
	_, err = profiles.Reconcile(homes, map[string]float64{"2025-06": 1440}, 1.9, axis)
	fmt.Println(err)
	// Output:
	// 1440.000000 kWh in June, a peak of 4 kW, the first day 1.000 2.000 1.000 4.000 kW
	// shape "homes": 2025-06 has 1440 kWh, which is more than its peak of 1.9 kW all the time (1368 kWh)
}
