package settle

import "time"

// arming decides whether the load has moved since the last weight was taken.
//
// Two references are kept. The near one follows a load that drifts slowly while it
// rests, so that an evaporating vessel is not taken again; a step of ReArmG away from
// it re-arms. The far one stays at the taken weight; ten times the step away from
// it re-arms too, so that a slow trickle cannot carry the near one along for ever.
type arming struct {
	armed  bool
	any    bool          // a weight was taken before
	takenG float64       // the far reference
	nearG  float64       // the near reference
	moved  time.Duration // when the load first moved away
	since  time.Duration // since when it is away
	isAway bool
	dark   bool // the display was blank since: perhaps tared
	tared  bool // the balance was told to tare: its zero counts
}

const farSteps = 10

func (a *arming) observe(at time.Duration, massG float64, stable bool, opt Options) {
	if a.armed || !a.any {
		if !a.any && a.moved == 0 {
			a.moved = at
		}
		return
	}
	if a.tared && stable && distance(massG, 0) <= opt.BandG {
		a.armed, a.moved = true, at
		return
	}
	step := opt.ReArmG
	if a.dark && stable {
		step = opt.BandG
	}
	if distance(massG, a.nearG) <= step && distance(massG, a.takenG) <= farSteps*opt.ReArmG {
		a.isAway = false
		return
	}
	if !a.isAway {
		a.isAway, a.since = true, at
	}
	if stable || at-a.since >= opt.ReArmHold {
		a.armed, a.moved = true, a.since
	}
}

// follow lets the near reference drift with a load at rest.
func (a *arming) follow(w *window, dwell time.Duration) {
	if !a.armed && !a.isAway && w.length() >= dwell {
		a.nearG = w.middle()
		a.dark = false
	}
}

// away: the load is certainly another one.
func (a *arming) away(at time.Duration) {
	if !a.armed {
		a.armed, a.moved = true, at
	}
}

// blank: after a dark display a small change counts, because it may be a tare.
func (a *arming) blank() { a.dark, a.isAway = true, false }

// break_: what was away before a gap may have come back in it.
func (a *arming) break_() { a.isAway = false }

func (a *arming) taken(at time.Duration, massG float64) {
	*a = arming{any: true, takenG: massG, nearG: massG, moved: at}
}
