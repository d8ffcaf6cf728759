package profiles_test

import (
	"fmt"
	"testing/fstest"

	"yearflow/profiles"
)

// A roof of 10 kW on an inverter of 8 kVA through the middle of a bright day.
func ExampleSolarSeries() {
	files := fstest.MapFS{"weather.csv": {Data: []byte(`time,ghi [W/m2],dni [W/m2],dhi [W/m2],temperature [degC],wind [m/s],latitude [deg],longitude [deg],elevation [m]
2025-04-20T09:00-07:00,620,790,110,8,2,39.74,-104.99,1609
2025-04-20T10:00-07:00,790,880,115,10,3,39.74,-104.99,1609
2025-04-20T11:00-07:00,900,930,120,11,3,39.74,-104.99,1609
2025-04-20T12:00-07:00,,,,12,4,39.74,-104.99,1609
2025-04-20T13:00-07:00,850,840,140,13,4,39.74,-104.99,1609
`)}}
	weather, err := profiles.OpenWeather(files, "weather.csv", profiles.WeatherOptions{})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, text := range weather.Assumed {
		fmt.Println(text)
	}
	roof := profiles.DefaultArray(weather.Site)
	roof.DCKW, roof.RatingKVA, roof.Tilt, roof.Azimuth = 10, 8, 25, 180

	start, end := weather.Span()
	axis := profiles.Axis{Start: start, End: end, Step: weather.StepLength()}
	solar, err := profiles.SolarSeries("roof", weather, roof, axis)
	if err != nil {
		fmt.Println(err)
		return
	}
	for k := range solar.AC.Len() {
		fmt.Printf("%.2f of %.2f kW\n", solar.AC.Value(k), solar.Available.Value(k))
	}
	// Output:
	// ghi: 1 of 5 values were missing and are estimated by the clear-sky index of the intervals around them, the first at 2025-04-20T19:00:00+00:00 (line 5)
	// 6.11 of 6.11 kW
	// 7.49 of 7.49 kW
	// 8.00 of 8.24 kW
	// 8.00 of 8.03 kW
	// 7.38 of 7.38 kW
}
