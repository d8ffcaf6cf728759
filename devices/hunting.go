package devices

// A device hunts when it changes direction more than HuntingChanges times within
// HuntingWindow.
const (
	HuntingChanges = 10
	HuntingWindow  = 3600 * Second
)

// Hunting watches the actions of one device. The zero value has seen none.
type Hunting struct {
	Direction int8 // of the last action
	Count     uint8
	Changes   [HuntingChanges + 1]Time // the last changes of direction, oldest first; Count of them are set
}

// See returns the watch after an action at an instant, +1 for a raise or a closing
// and −1 for a lower or an opening, and whether the device began to hunt with it.
func (h Hunting) See(now Time, direction int) (Hunting, bool) {
	d := int8(1)
	if direction < 0 {
		d = -1
	}
	if d == h.Direction {
		return h, false
	}
	first := h.Direction == 0
	h.Direction = d
	if first {
		return h, false
	}
	hunted := h.Hunts(now)
	if int(h.Count) == len(h.Changes) {
		copy(h.Changes[:], h.Changes[1:])
		h.Count--
	}
	h.Changes[h.Count] = now
	h.Count++
	full := int(h.Count) == len(h.Changes)
	return h, !hunted && full && now-h.Changes[0] <= HuntingWindow
}

// Until returns the instant from which the hour just past no longer holds more than
// HuntingChanges changes, and false where it never did with the changes seen last.
func (h Hunting) Until() (Time, bool) {
	last := len(h.Changes) - 1
	if int(h.Count) <= last || h.Changes[last]-h.Changes[0] > HuntingWindow {
		return 0, false
	}
	return h.Changes[0] + HuntingWindow, true
}

// Hunts tells whether the device counts as hunting just after an instant.
func (h Hunting) Hunts(now Time) bool {
	until, ok := h.Until()
	return ok && now < until
}
