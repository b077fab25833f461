package bench

import (
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/tune/job"
)

func TestWholeJobInVirtualTime(t *testing.T) {
	cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	r, text, err := RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
	for _, s := range job.Path {
		err := j.Do(s.ID)
		t.Logf("%8.2f s  %-12s %v", v.Now().Seconds(), s.ID, err)
		if err != nil {
			break
		}
	}
	for _, l := range v.s.view.Log {
		t.Logf("%8.3f %s", l.At.Seconds(), l.Text)
	}
}
