// Writes sun-reference.csv: where the sun stands without refraction, by the
// general-purpose astronomy library astronomy-engine 2.1.19 (MIT licence, npm), which
// states an accuracy of one arcminute and uses VSOP87, nutation and parallax.
//
//   npm install astronomy-engine@2.1.19 && node sun-reference.mjs > sun-reference.csv
//
// Every hour of 2025 at one place, then every 1003rd hour of 1950 to 2050 at six.
import * as A from 'astronomy-engine'

const sites = [[39.742476, -105.1786, 1830.14], [-33.87, 151.21, 40], [69.65, 18.96, 10], [0.1, -78.5, 2850], [51.48, 0, 30], [-54.8, -68.3, 20]]

function row(time, site) {
  const [latitude, longitude, height] = sites[site]
  const observer = new A.Observer(latitude, longitude, height)
  const sun = A.Equator(A.Body.Sun, time, observer, true, true)
  const seen = A.Horizon(time, observer, sun.ra, sun.dec)
  const clock = time.toISOString().slice(0, 13)
  console.log([clock, site, seen.altitude.toFixed(3), seen.azimuth.toFixed(3)].join(','))
}

const hour = 3600e3
console.log('# astronomy-engine 2.1.19, MIT licence; written by sun-reference.mjs')
sites.forEach((s, i) => console.log(`# site ${i}: latitude ${s[0]}, longitude ${s[1]}, height ${s[2]} m`))
console.log('hour (UTC),site,elevation [deg],azimuth [deg]')
for (let t = Date.UTC(2025, 0, 1); t < Date.UTC(2026, 0, 1); t += hour) row(new Date(t), 0)
for (let t = Date.UTC(1950, 0, 1), i = 0; t < Date.UTC(2051, 0, 1); t += 1003 * hour, i++) row(new Date(t), i % sites.length)
