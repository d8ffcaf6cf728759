package profiles

import "math"

// placeRegister turns the readings of a counter into power. Between two readings that
// are more than a step apart the sum is known and its shape is not. A reading below the
// one before is a counter that went over its highest number, where the rise that this
// makes is within reach, else one that was set back or exchanged: that interval is not
// known.
func (w *mender) placeRegister(to *work, o *ordered, origin, step uint32, scale float64) {
	rows := o.rows[:0]
	for _, r := range o.rows {
		if r.v == r.v {
			rows = append(rows, r)
		}
	}
	o.rows = rows
	modulus, rise := counterOf(rows, step)
	for i := 1; i < len(rows); i++ {
		a, b := rows[i-1], rows[i]
		if a.sec < origin || int((b.sec-origin)/step) > len(to.old) {
			continue
		}
		from, n := int((a.sec-origin)/step), int((b.sec-a.sec)/step)
		d, known := risen(a.v, b.v, modulus, rise*float64(n), w.net)
		for k := from; k < from+n; k++ {
			switch {
			case known:
				to.old[k] = d / float64(n) * scale
				if n > 1 {
					to.why[k] = missing
				}
			default:
				to.why[k] = counterReset
			}
		}
		if known && n > 1 {
			to.totals = append(to.totals, total{from, n})
		}
	}
}

// counterOf returns the number at which the counter begins again, the next power of
// ten, and the largest rise in a step.
func counterOf(rows []placed, step uint32) (modulus, rise float64) {
	top := 0.0
	for i, r := range rows {
		top = max(top, r.v)
		if i > 0 && r.sec-rows[i-1].sec == step {
			rise = max(rise, r.v-rows[i-1].v)
		}
	}
	if top <= 0 {
		return 0, rise
	}
	return math.Pow(10, math.Floor(math.Log10(top))+1), rise
}

// risen returns what a counter counted between two readings, and whether that is known.
func risen(a, b, modulus, most float64, net bool) (d float64, known bool) {
	d = b - a
	if d >= 0 {
		return d, true
	}
	if over := d + modulus; a > 0.9*modulus && b < 0.1*modulus && over <= 2*most {
		return over, true
	}
	return d, net && -d <= modulus/2
}
