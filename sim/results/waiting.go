package results

import "yearflow/sim/powerflow/vector"

// waiting is the bins of settled voltages that wait for others: the histograms of many points
// are far apart in memory, and each is best met seldom.
type waiting struct {
	lists []heldBins
	last  int // that is being filled
}

// heldBins is the bins of up to binsHeld intervals, by point and interval: as much of a
// point as a line of the cache has.
type heldBins struct {
	bins []uint16
	ns   []int64 // by interval
}

// binsHeld times binLists is how many intervals' voltages wait to be entered.
const (
	binsHeld = 32
	binLists = 4
)

// hold keeps the bins of some lanes, by point and lane.
func (w *waiting) hold(bins []int32, spans []span, d *distribution) {
	to := w.room(len(spans), d)
	at := len(to.ns)
	for i := range d.bins {
		held, b := to.bins[i*binsHeld+at:(i+1)*binsHeld], (*[vector.Lanes]int32)(bins[i*vector.Lanes:])
		for k, t := range spans {
			held[k] = uint16(b[t.lane&(vector.Lanes-1)])
		}
	}
	for _, t := range spans {
		to.ns = append(to.ns, t.ns)
	}
}

// room returns a list with room for some intervals.
func (w *waiting) room(intervals int, d *distribution) *heldBins {
	if w.lists == nil {
		w.lists = make([]heldBins, binLists)
		for i := range w.lists {
			w.lists[i] = heldBins{make([]uint16, len(d.bins)*binsHeld), make([]int64, 0, binsHeld)}
		}
	}
	if len(w.lists[w.last].ns)+intervals > binsHeld {
		if w.last++; w.last == binLists {
			w.enter(d)
		}
	}
	return &w.lists[w.last]
}

// full tells whether intervals so many would be entered before they are held.
func (w *waiting) full(intervals int) bool {
	return w.last == binLists-1 && len(w.lists[w.last].ns)+intervals > binsHeld
}

// enter enters into the histograms what has been held.
func (w *waiting) enter(d *distribution) {
	for i := range d.bins {
		for k := range w.lists {
			x := &w.lists[k]
			d.bins[i].enterAll(x.bins[i*binsHeld:(i+1)*binsHeld], x.ns)
		}
	}
	for k := range w.lists {
		w.lists[k].ns = w.lists[k].ns[:0]
	}
	w.last = 0
}
