package sim_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/profiles"
	"yearflow/sim"
	"yearflow/sim/feeder"
)

// sunny is a plant study with a solar generator that is worked out from weather.
func sunny(settings string, extra map[string]string) fstest.MapFS {
	f := plantStudy("1h", 2, extra)
	f["feeder/generators.csv"] = text("generator,node,phases,kind,rating [kVA],dc [kW],tilt [deg],azimuth [deg],losses [%],temperature coefficient [%/degC],inverter efficiency [%]\ng,end,ABC,solar,400,500,30,180,10,-0.4,97\n")
	f["study.toml"] = text(string(f["study.toml"].Data) + settings)
	return f
}

// Without weather the sky is clear, which is announced; the sun is up at noon of the
// site and down at midnight.
func TestClearSkyFallback(t *testing.T) {
	e := ready(t, sunny("[weather]\nlatitude = 40\nlongitude = 0\n", nil))
	said := false
	for _, w := range e.Warnings {
		said = said || strings.Contains(w.Text, "cloudless sky")
	}
	if !said {
		t.Errorf("nothing says that the sky is assumed clear: %v", e.Warnings)
	}
	for step, want := range map[int][2]float64{0: {0, 0}, 12: {250, 400}, 23: {0, 0}} {
		in, err := e.Solve(step, sim.Positions{Given: true})
		if err != nil {
			t.Fatal(err)
		}
		if kw := real(in.State.Generation[0]) / 1000; kw < want[0] || kw > want[1] {
			t.Errorf("step %d: %.3f kW, want %v", step, kw, want)
		}
	}
}

// A site is needed.
func TestSolarWithoutSite(t *testing.T) {
	st, err := feeder.Open(sunny("", nil), "")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := sim.Prepare(st, sim.Options{}); err == nil || !strings.Contains(err.Error(), "feeder/generators.csv:2: output from weather needs a site") {
		t.Errorf("got %v", err)
	}
}

// A file of weather gives what the array makes of it: the energy of the run is that
// of the array's own output, hour by hour.
func TestSolarFromWeatherFile(t *testing.T) {
	var b strings.Builder
	b.WriteString("time,ghi [W/m2],temperature [degC],wind [m/s]\n")
	start := time.Date(2025, 3, 3, 0, 0, 0, 0, time.UTC)
	site := profiles.Site{Latitude: 40}
	a := profiles.DefaultArray(site)
	a.DCKW, a.RatingKVA, a.Tilt, a.Azimuth, a.Losses, a.TempCoefficient, a.InverterEfficiency = 500, 400, 30, 180, 10, -0.4, 97
	want := 0.0
	for h := range 48 {
		from := start.Add(time.Duration(h) * time.Hour)
		day := profiles.DaylightOver(from.UnixNano(), from.Add(time.Hour).UnixNano(), site)
		ghi, _, _ := profiles.ClearSky(day.SunPosition, site, profiles.ClearTurbidity)
		ghi = math.Round(0.6 * ghi * day.Fraction)
		fmt.Fprintf(&b, "%s,%g,12,3\n", from.Format("2006-01-02T15:04Z"), ghi)
	}
	f := sunny("[weather]\nfile = \"weather.csv\"\nlatitude = 40\nlongitude = 0\n", map[string]string{"weather.csv": b.String()})
	w, err := profiles.OpenWeather(f, "weather.csv", profiles.WeatherOptions{Zone: time.UTC, Site: &site})
	if err != nil {
		t.Fatal(err)
	}
	for h := range 48 {
		from := start.Add(time.Duration(h) * time.Hour).UnixNano()
		ac, _ := a.Output(w.Point(h), profiles.DaylightOver(from, from+3600e9, site))
		want += ac
	}
	e := ready(t, f)
	o, err := e.Run(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	if got := o.Plants[0].Delivered; math.Abs(got-want) > 1e-6*want || want < 500 {
		t.Errorf("the run delivers %.4f kWh, the array %.4f kWh", got, want)
	}
	if files := e.ProfileFiles(); files[len(files)-1] != "weather.csv" {
		t.Errorf("the weather is not among the inputs: %v", files)
	}
}

// What is assumed of an array is told once, at the first generator.
func TestSolarAssumptions(t *testing.T) {
	f := sunny("[weather]\nlatitude = -40\nlongitude = 0\n", nil)
	f["feeder/generators.csv"] = text("generator,node,phases,kind,rating [kVA],dc [kW]\ng,end,ABC,solar,400,500\nh,end,ABC,solar,400,500\n")
	e := ready(t, f)
	told := map[string]string{}
	for _, a := range e.Study.Model.Assumed {
		if _, twice := told[a.What]; twice {
			t.Errorf("%q is told twice", a.What)
		}
		told[a.What] = a.Value
	}
	for what, want := range map[string]string{"tilt [deg]": "20 ", "azimuth [deg]": "0 ", "losses [%]": "14 ", "inverter efficiency [%]": "96 "} {
		if got := told["solar generators: "+what]; !strings.HasPrefix(got, want) {
			t.Errorf("%s: %q, want %q", what, got, want)
		}
	}
}
