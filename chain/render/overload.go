package render

import (
	"container/heap"
	"math"
	"sort"
)

// EventKind tells what an overload ran into.
type EventKind string

// The kinds of overload event.
const (
	UpperLimit     EventKind = "high"        // the output's upper limit
	LowerLimit     EventKind = "low"         // the output's lower limit
	Slew           EventKind = "slew"        // the slew rate
	CutOff         EventKind = "cut off"     // a capsule's drain current reached 0
	Saturated      EventKind = "saturated"   // a capsule's drain reached its lowest voltage
	Clamped        EventKind = "clamp"       // a clamp's diode conducts
	TooLoud        EventKind = "too loud"    // a microphone beyond its maximum level
	CommonMode     EventKind = "common mode" // an amplifier's input left its range: watched, not simulated
	OutputCurrent  EventKind = "current"     // an amplifier's output gave more than it can: watched, not simulated
	ConverterRange EventKind = "range"       // the converter's span
)

// Limits tells whether the kind changes the sound, and is not only watched.
func (k EventKind) Limits() bool { return k != CommonMode && k != OutputCurrent }

// Event is one stretch of overload.
type Event struct {
	Owner    string // stage, bias, input or "converter"
	Kind     EventKind
	From, To float64 // s, from the tracks' first sample
	Over     float64 // dB by which the linear chain would have passed the limit at its worst; 0 where not known
}

const (
	// mostEvents is how many events are kept: the largest.
	mostEvents = 1000
	// joined is the gap in s below which two stretches of the same kind are one event.
	joined = 50e-6
)

// eventHeap has the smallest event on top.
type eventHeap []Event

func (h eventHeap) Len() int           { return len(h) }
func (h eventHeap) Less(i, j int) bool { return smaller(h[i], h[j]) }
func (h eventHeap) Swap(i, j int)      { h[i], h[j] = h[j], h[i] }
func (h *eventHeap) Push(x any)        { *h = append(*h, x.(Event)) }
func (h *eventHeap) Pop() any {
	last := (*h)[len(*h)-1]
	*h = (*h)[:len(*h)-1]
	return last
}

// smaller orders events by how far over, then how long, then the later first.
func smaller(a, b Event) bool {
	if a.Over != b.Over {
		return a.Over < b.Over
	}
	if la, lb := a.To-a.From, b.To-b.From; la != lb {
		return la < lb
	}
	return a.From > b.From
}

// eventList keeps the largest events and counts all.
type eventList struct {
	kept  eventHeap
	count int64
}

func (l *eventList) add(e Event) {
	l.count++
	if len(l.kept) < mostEvents {
		heap.Push(&l.kept, e)
	} else if smaller(l.kept[0], e) {
		l.kept[0] = e
		heap.Fix(&l.kept, 0)
	}
}

// inTime returns the kept events in the order of time.
func (l *eventList) inTime() []Event {
	events := append([]Event(nil), l.kept...)
	sort.SliceStable(events, func(i, j int) bool {
		a, b := events[i], events[j]
		if a.From != b.From {
			return a.From < b.From
		}
		if a.Owner != b.Owner {
			return a.Owner < b.Owner
		}
		return a.Kind < b.Kind
	})
	return events
}

// watcher follows one kind of overload of one owner from step to step.
type watcher struct {
	owner string
	kind  EventKind
	list  *eventList
	dt    float64 // s, a step
	scope *scope  // that is told; nil: none

	open        bool
	first, last int64 // steps of the open event
	ratio       float64
	worst       Event // longest-reaching closed event
	First       float64
	Count       int64
	Steps       int64
}

// touch tells that the limit held at a step that stands for several up to it, and by which ratio the linear chain would
// have passed it; what comes before the tracks' first sample does not count.
func (w *watcher) touch(step int64, ratio float64, several int64) {
	if step < 0 {
		return
	}
	several = min(several, step+1)
	w.Steps += several
	if w.scope != nil {
		w.scope.note(w.owner, w.kind, step, ratio)
	}
	if w.open && float64(step-w.last)*w.dt > math.Max(joined, 1.5*float64(several)*w.dt) {
		w.close()
	}
	if !w.open {
		w.open, w.first, w.ratio = true, step, 0
	}
	w.last = step
	w.ratio = math.Max(w.ratio, ratio)
}

// close ends the open event, if there is one.
func (w *watcher) close() {
	if !w.open {
		return
	}
	w.open = false
	e := Event{Owner: w.owner, Kind: w.kind, From: float64(w.first) * w.dt, To: float64(w.last+1) * w.dt}
	if w.ratio > 1 && !math.IsInf(w.ratio, 1) { // infinite where the chain rests on the limit
		e.Over = 20 * math.Log10(w.ratio)
	}
	if w.Count == 0 {
		w.First = e.From
	}
	w.Count++
	if w.Count == 1 || smaller(w.worst, e) {
		w.worst = e
	}
	w.list.add(e)
}

// Overload is what one kind of overload of one owner came to over a run.
type Overload struct {
	Owner   string
	Kind    EventKind
	Events  int64
	Seconds float64
	First   float64 // s
	Worst   Event
}

func (w *watcher) result() Overload {
	w.close()
	return Overload{Owner: w.owner, Kind: w.kind, Events: w.Count, Seconds: float64(w.Steps) * w.dt, First: w.First, Worst: w.worst}
}
