package sim

import (
	"os"
	"runtime"
	"runtime/debug"
	"strconv"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"gainwright/safety"
)

const worldTime = 4 * time.Minute

// TestOneSeed plays the world of GAINWRIGHT_SEED, with every event if
// GAINWRIGHT_TRACE is set; without, it shows that a seed gives the same history
// twice.
func TestOneSeed(t *testing.T) {
	seed := uint64(1)
	if s := os.Getenv("GAINWRIGHT_SEED"); s != "" {
		n, err := strconv.ParseUint(s, 10, 64)
		if err != nil {
			t.Fatal(err)
		}
		seed = n
	}
	one := New(seed, nil)
	if os.Getenv("GAINWRIGHT_TRACE") != "" {
		one.Trace = func(s string) { t.Log(s) }
	}
	a := one.Run(worldTime)
	for _, v := range a.Violations {
		t.Error(v)
	}
	b := New(seed, nil).Run(worldTime)
	if a.Digest != b.Digest || a.Active != b.Active {
		t.Errorf("seed %d gave two histories: %x, %x", seed, a.Digest, b.Digest)
	}
	if c := New(seed+1, nil).Run(worldTime); c.Digest == a.Digest {
		t.Error("two seeds gave the same history: the digest sees nothing")
	}
	t.Logf("ends %v, trips %v, active %v", a.Ends, a.Codes, a.Active)
}

// TestWorlds lets many seeded worlds go wrong in every way and has the referee
// judge each. GAINWRIGHT_SIM_MINUTES asks for that many simulated minutes in
// Armed, Count-down, Running and Stopping instead of the few of a usual run.
func TestWorlds(t *testing.T) {
	minutes, each := 200.0, 1
	if s := os.Getenv("GAINWRIGHT_SIM_MINUTES"); s != "" {
		n, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		minutes, each = n, int(n/100)
	}
	if testing.Short() {
		minutes = 50
	}
	total := crowd(t, time.Duration(minutes*float64(time.Minute)))
	t.Logf("%v active; ends %v; trips %v", total.Active, total.Ends, total.Codes)
	for p := safety.Disarmed; p <= safety.Tripped; p++ {
		for f := NoFault + 1; f < FaultEnd; f++ {
			if minutes >= 200 && total.Cover[p][f] < each {
				t.Errorf("%v with %v came %d times", p, f, total.Cover[p][f])
			}
		}
	}
}

// crowd runs worlds on all cores, a batch of seeds at a time, until they have been
// active for d in all. Which seeds run does not depend on the number of cores.
func crowd(t *testing.T, d time.Duration) (total Result) {
	defer debug.SetGCPercent(debug.SetGCPercent(800)) // worlds make much short-lived rubbish
	total.Codes = map[safety.Code]int{}
	const batch = 20
	for first := uint64(1); total.Active < d && len(total.Violations) == 0; first += batch {
		var results [batch]Result
		var next atomic.Int64
		var wg sync.WaitGroup
		for range runtime.GOMAXPROCS(0) {
			wg.Go(func() {
				for i := next.Add(1) - 1; i < batch; i = next.Add(1) - 1 {
					results[i] = New(first+uint64(i), nil).Run(worldTime)
				}
			})
		}
		wg.Wait()
		for _, r := range results {
			add(t, &total, r)
		}
	}
	return total
}

func add(t *testing.T, total *Result, r Result) {
	total.Active += r.Active
	for p := range r.Cover {
		for f := range r.Cover[p] {
			total.Cover[p][f] += r.Cover[p][f]
		}
	}
	for i := range r.Ends {
		total.Ends[i] += r.Ends[i]
	}
	for c, n := range r.Codes {
		total.Codes[c] += n
	}
	if len(r.Violations) > 0 {
		total.Violations = append(total.Violations, r.Violations...)
		t.Errorf("seed %d: %v\nplay it: GAINWRIGHT_SEED=%d GAINWRIGHT_TRACE=1 go test ./safety/sim -run TestOneSeed -v", r.Seed, r.Violations[0], r.Seed)
	}
}
