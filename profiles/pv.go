package profiles

import (
	"fmt"
	"math"
)

// Array is a solar generator: modules on one plane, and their inverter. Begin with
// DefaultArray: a zero means zero.
type Array struct {
	DCKW               float64 // of the modules at 1000 W/m² and 25 °C
	Tilt               float64 // from the horizontal, degrees, 0 to 90
	Azimuth            float64 // that the modules face, degrees from north, clockwise
	Losses             float64 // soiling, reflection, mismatch, wiring, outages, % of DC
	TempCoefficient    float64 // of the DC power, %/°C, negative
	InverterEfficiency float64 // %, the same at every load
	RatingKVA          float64 // of the inverter; 0: none, nothing is clipped
	WindFactor         float64 // wind at the modules over the wind of the weather, which is measured at 10 m
	Albedo             float64
}

// DefaultArray returns what is common practice for modules of crystalline silicon on
// a roof: 20° towards the equator, 14 % losses, −0.4 %/°C, an inverter of 96 %,
// 0.6 of the wind at 10 m, albedo 0.2. DCKW and RatingKVA are left at 0.
func DefaultArray(s Site) Array {
	a := Array{Tilt: 20, Azimuth: 180, Losses: 14, TempCoefficient: -0.4, InverterEfficiency: 96, WindFactor: 0.6, Albedo: Albedo}
	if s.Latitude < 0 {
		a.Azimuth = 0
	}
	return a
}

// ArrayFault is a value of an Array that cannot be. Field is its column, such as
// "tilt"; Text says what would do.
type ArrayFault struct{ Field, Text string }

// Check returns what cannot be.
func (a Array) Check() []ArrayFault {
	var faults []ArrayFault
	check := func(ok bool, field, format string, args ...any) {
		if !ok {
			faults = append(faults, ArrayFault{field, fmt.Sprintf(format, args...)})
		}
	}
	within := func(v, low, high float64) bool { return v >= low && v <= high } // not a number is not within
	check(within(a.DCKW, 0, 1e7), "dc", "want the modules' power of 0 or more, got %g kW", a.DCKW)
	check(within(a.Tilt, 0, 90), "tilt", "want 0 (flat) to 90 (a wall) degrees, got %g", a.Tilt)
	check(within(a.Azimuth, -360, 360), "azimuth", "want degrees from north, clockwise, 0 to 360 (south 180), got %g", a.Azimuth)
	check(within(a.Losses, 0, 100), "losses", "want 0 to 100 %%, got %g", a.Losses)
	check(within(a.TempCoefficient, -2, 0), "temperature coefficient", "want -2 to 0 %%/degC, as modules give less when they are hot (silicon about -0.4), got %g", a.TempCoefficient)
	check(a.InverterEfficiency > 0 && a.InverterEfficiency <= 100, "inverter efficiency", "want more than 0 and at most 100 %%, got %g", a.InverterEfficiency)
	check(within(a.RatingKVA, 0, 1e7), "rating", "want 0 or more, got %g kVA", a.RatingKVA)
	check(within(a.WindFactor, 0, 2), "wind factor", "want 0 to 2, got %g", a.WindFactor)
	check(within(a.Albedo, 0, 1), "albedo", "want 0 to 1, got %g", a.Albedo)
	return faults
}

// Plane returns the plane of the modules.
func (a Array) Plane() Plane { return Plane{a.Tilt, a.Azimuth, a.Albedo} }

// Faiman returns the temperature in °C of modules under light in W/m², in air of
// ambient °C and wind in m/s at the modules,
//
//	T = Ta + G/(25 + 6.84·W)
//
// (D. Faiman, Progress in Photovoltaics 16, 2008; the means of seven kinds of module).
func Faiman(light, ambient, wind float64) float64 { return ambient + light/(25+6.84*max(wind, 0)) }

// NOCT returns the temperature in °C of cells by the nominal operating cell
// temperature, which is measured at 800 W/m², 20 °C and 1 m/s,
//
//	T = Ta + (NOCT − 20)/800·G
func NOCT(light, ambient, noct float64) float64 { return ambient + (noct-20)/800*light }

// DC returns the power in kW of the modules under light in W/m² at a cell
// temperature in °C, before losses,
//
//	P = P_stc·G/1000·(1 + γ·(T − 25))
func (a Array) DC(light, cell float64) float64 {
	return max(0, a.DCKW*light/1000*(1+a.TempCoefficient/100*(cell-25)))
}

// WeatherPoint is the mean weather of an interval: irradiance in W/m², temperature in
// °C, wind in m/s at 10 m.
type WeatherPoint struct{ GHI, DNI, DHI, Temperature, Wind float64 }

// light returns the irradiance on the modules in W/m². With the sun on the horizon its
// bright surroundings are a small number over another: there the sky is taken to be even.
func (a Array) light(sun SunPosition, ghi, dni, dhi float64) float64 {
	if sun.Zenith > lowSun {
		return a.Plane().Isotropic(sun, ghi, dni, dhi).Total()
	}
	return a.Plane().HayDavies(sun, ghi, dni, dhi).Total()
}

// Output returns the mean power in kW that the array feeds into the feeder over the
// interval of a weather point and its daylight, and how much more it would give if the
// rating of its inverter were no limit. The light is put on the plane by HayDavies, the
// modules are warmed by Faiman. Without daylight both are 0. Shading, snow and the
// consumption of the inverter at night are not modelled; reflection is part of the losses.
func (a Array) Output(w WeatherPoint, d Daylight) (ac, clipped float64) {
	if d.Fraction <= 0 {
		return 0, 0
	}
	// The means of the whole interval fell within its sunlit part. Where that is
	// short an odd watt would become a blaze: never more than outside the atmosphere.
	cos := max(0, math.Cos(d.Zenith*radians))
	dni := min(max(w.DNI, 0)/d.Fraction, d.Extraterrestrial)
	dhi := max(w.DHI, 0) / d.Fraction
	ghi := max(w.GHI, 0) / d.Fraction
	if d.Fraction < 1 {
		most := d.Extraterrestrial*cos + 20
		dhi, ghi = min(dhi, most), min(ghi, most)
	}
	light := a.light(d.SunPosition, ghi, dni, dhi)
	dc := a.DC(light, Faiman(light, w.Temperature, w.Wind*a.WindFactor)) * (1 - a.Losses/100)
	available := dc * a.InverterEfficiency / 100
	ac = available
	if a.RatingKVA > 0 {
		ac = min(ac, a.RatingKVA)
	}
	return ac * d.Fraction, (available - ac) * d.Fraction
}
