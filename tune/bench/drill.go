package bench

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"sync"
	"time"

	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/sheet"
)

// Scene is a failure that a drill brings about.
type Scene struct {
	ID, Title string
	Call      string // what somebody calls out when it begins
	Expected  string // of the person
	bend      func(*simrig.Config, *Options)
	do        func(*Drill)
	undo      func(*Drill)
	loop      bool // only in closed loop
}

// Scenes are the failures that a drill knows.
func Scenes() []Scene {
	inject := func(kind string, value float64) func(*Drill) {
		return func(d *Drill) { d.far.Rig(func(r *simrig.Rig) { r.Inject(kind, value) }) }
	}
	cure := func(kinds ...string) func(*Drill) {
		return func(d *Drill) { d.far.Rig(func(r *simrig.Rig) { r.Cure(kinds...) }) }
	}
	estop := func(working bool) func(*Drill) {
		return func(d *Drill) { d.far.Rig(func(r *simrig.Rig) { r.SetInput("estop", working) }) }
	}
	return []Scene{
		{ID: "F1", Title: "cable pulled in motion", Expected: "look at the shaft, not at the screen; E-stop if it turns; then plug in and begin at the identity",
			do: func(d *Drill) { inject(simrig.FaultMute, 0)(d); inject(simrig.FaultDeaf, 0)(d) }, undo: cure(simrig.FaultMute, simrig.FaultDeaf)},
		{ID: "F2", Title: "encoder wired backwards", Expected: "power off, then swap the leads or the channels; no closed loop until the sign check passes",
			bend: func(c *simrig.Config, _ *Options) {
				c.Faults = append(c.Faults, simrig.FaultSpec{Kind: simrig.FaultReversed})
			}},
		{ID: "F3", Title: "encoder dead in motion", Expected: "power off; look at plug and cable of the encoder; never close a loop like this", do: inject(simrig.FaultDeadEncoder, 0)},
		{ID: "F4", Title: "shaft jams", Expected: "power off, turn by hand, feel for the jam; wait until it has cooled; no second try without a cause", do: inject(simrig.FaultStalled, 0)},
		{ID: "F5", Title: "encoder coupling slips", Expected: "stop; look at the encoder and its coupling; what was measured since is not used", do: inject(simrig.FaultSlip, 0.6), loop: true},
		{ID: "F6", Title: "supply folds back", Expected: "raise the supply's current limit, or make the run smaller; the record is one of the supply", do: inject(simrig.FaultSupplyFolds, 0.3)},
		{ID: "F7", Title: "a person steps near", Call: "SOMEBODY STEPS UP TO THE SHAFT", Expected: "any key at once; then say why it was stopped; look before the area is called clear", do: func(*Drill) {}},
		{ID: "F8", Title: "laptop sleeps in motion", Expected: "treat it as a link lost: look at the shaft, read the board's own stop, then arm again",
			do: func(d *Drill) { d.live.do(func(s *session) { s.core.Do(safety.Wake{At: s.now}) }) }},
		{ID: "F9", Title: "rig file of another motor", Expected: "another file, or a new one; the motor is not what the file says",
			bend: func(c *simrig.Config, o *Options) {
				text := bytes.Replace(o.Job.RigText, []byte("[motor]\n"), fmt.Appendf(nil, "[motor]\nke_V_s_per_rad = %.4g\n", 0.45*c.Motor.K), 1)
				if r, err := rig.Parse("drill", text); err == nil {
					o.Job.Rig, o.Job.RigText = r, text
				}
			}},
		{ID: "F10", Title: "another console holds the port", Expected: "find who holds it; never two consoles on one motor",
			bend: func(_ *simrig.Config, o *Options) {
				open, times := o.Open, 0
				o.Open = func(path string) (Opened, error) {
					if times++; times == 1 {
						return Opened{}, errors.New("the port is held by another console (pid 4711, since 09:12)")
					}
					return open(path)
				}
			}},
		{ID: "F11", Title: "power dips and returns", Expected: "look for the dip; running gains are the stored ones again; make the checks again", do: inject(simrig.FaultRestarts, 0)},
		{ID: "F12", Title: "E-stop pressed", Expected: "find out who pressed it and why; its release starts nothing; arm again only then", do: estop(false), undo: estop(true)},
		{ID: "F13", Title: "telemetry repeats itself: the screen shows an old moment", Expected: "the tick stands still: do not believe the numbers; look at the shaft; ctrl-l draws the screen anew",
			do: inject(simrig.FaultStaleSequence, 0), undo: cure(simrig.FaultStaleSequence)},
	}
}

// SceneOf finds a scene by its id; "" draws one.
func SceneOf(id string, seed uint64) (Scene, error) {
	all := Scenes()
	if id == "" {
		return all[rand.New(rand.NewPCG(seed, 13)).IntN(len(all))], nil
	}
	for _, s := range all {
		if s.ID == id {
			return s, nil
		}
	}
	return Scene{}, fmt.Errorf("no scene is called %q: there are F1 to F%d", id, len(all))
}

// sceneLasts is how long a failure stays that passes by itself.
const sceneLasts = 8 * time.Second

// sceneSpeed is how fast the shaft has to turn for a scene to begin, rad/s.
const sceneSpeed = 20

// Drill brings one scene about, without a word, and notes what is done about it.
type Drill struct {
	scene Scene
	wait  time.Duration // into the run
	far   *Served
	live  *Live

	mu    sync.Mutex
	begun bool
	at    time.Duration
	rec   sheet.DrillRecord
}

// NewDrill prepares a scene: it bends rig and options where it is there from the
// start, and watches the limiter. Serve tells it of the rig, Live of the bench.
func NewDrill(scene Scene, seed uint64, cfg *simrig.Config, o *Options) *Drill {
	rng := rand.New(rand.NewPCG(seed, 29))
	d := &Drill{scene: scene, wait: time.Duration(300+rng.IntN(900)) * time.Millisecond}
	d.rec = sheet.DrillRecord{Scene: scene.ID, Title: scene.Title, Expected: scene.Expected}
	if scene.bend != nil {
		scene.bend(cfg, o)
		d.begun, d.rec.Began = true, "the job, from its start"
	}
	o.Watch = d.watch
	o.AtClose = func() (string, any) { return sheet.NameDrill, d.Record() }
	return d
}

// Serve tells the drill of the simulated rig and of the bench.
func (d *Drill) Serve(far *Served, live *Live) { d.far, d.live = far, live }

// Record is what happened so far and what was done.
func (d *Drill) Record() sheet.DrillRecord {
	d.mu.Lock()
	defer d.mu.Unlock()
	return d.rec
}

// watch begins the scene in the first run behind the checks and notes what follows.
// It runs where the session lives, and acts from a goroutine of its own.
func (d *Drill) watch(st *safety.State, e safety.Event, out []safety.Effect) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if !d.begun {
		p := st.Plan.Plan()
		if _, tick := e.(safety.Tick); !tick || st.Phase != safety.Running || p.Check != safety.CheckNone || p.Inch || d.scene.loop && p.Segments[0].Mode != safety.ModeSpeed || st.Now-st.RunAt < d.wait || math.Abs(float64(st.Last.Speed)) < sceneSpeed || d.live == nil {
			return
		}
		d.begun, d.at = true, st.Now
		into := (st.Now - st.RunAt).Seconds()
		d.rec.Began, d.rec.RunS = "the run "+p.Name, &into
		go d.act()
		return
	}
	d.note(st, e, out)
}

// act does the scene and undoes it where it passes by itself.
func (d *Drill) act() {
	if d.scene.Call != "" {
		d.live.do(func(s *session) { s.view.Call = d.scene.Call })
	}
	d.scene.do(d)
	select {
	case <-time.After(sceneLasts):
	case <-d.live.over:
		return
	}
	if d.scene.undo != nil {
		d.scene.undo(d)
	}
	if d.scene.Call != "" {
		d.live.do(func(s *session) { s.view.Call = "" })
	}
}

func (d *Drill) note(st *safety.State, e safety.Event, out []safety.Effect) {
	since := func(to **float64) bool {
		if *to != nil {
			return false
		}
		s := (st.Now - d.at).Seconds()
		*to = &s
		return true
	}
	if d.rec.RunS == nil { // there from the start: no moment to count from
		for _, x := range out {
			if t, ok := x.(safety.TripLatched); ok && d.rec.StoppedBy == "" {
				d.rec.StoppedBy = "the limiter: " + t.Cause.String()
			}
		}
		return
	}
	moving := st.Phase.ArmHeld() || st.Phase == safety.Stopping
	switch e := e.(type) {
	case safety.Stop:
		if e.Source != safety.ByQuit && e.Source != safety.ByJob && since(&d.rec.KeyS) && d.rec.StoppedBy == "" {
			d.rec.StoppedBy = string(e.Source)
			since(&d.rec.StoppedS)
		}
	case safety.Key:
		if moving && since(&d.rec.KeyS) && d.rec.StoppedBy == "" {
			d.rec.StoppedBy = string(safety.ByOtherKey)
			since(&d.rec.StoppedS)
		}
	case safety.Acknowledge:
		if st.Trip.Acked {
			since(&d.rec.AckS)
		}
	case safety.Reset:
		if d.rec.AckS != nil && st.Phase == safety.Disarmed {
			since(&d.rec.ResetS)
		}
	case safety.ArmRequest:
		if st.Phase == safety.Arming && (d.rec.StoppedS != nil || d.rec.OffS != nil) {
			since(&d.rec.ArmedS)
		}
	case *safety.Sample:
		if e.State == protocol.Off || e.State == protocol.Tripped {
			if d.rec.StoppedBy != "" {
				since(&d.rec.OffS)
			}
		}
	case safety.OutputOff:
		if d.rec.StoppedBy != "" {
			since(&d.rec.OffS)
		}
	}
	for _, x := range out {
		if t, ok := x.(safety.TripLatched); ok && d.rec.StoppedBy == "" {
			d.rec.StoppedBy = "the limiter: " + t.Cause.String()
			since(&d.rec.StoppedS)
		}
	}
}
