package sheet

import (
	"bufio"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

// TestMain makes this test binary a job that writes entries until it is killed,
// if it is started as one.
func TestMain(m *testing.M) {
	if dir := os.Getenv("SHEET_TEST_WRITE"); dir != "" {
		h := testHeader
		h.Simulated = false
		s, err := Create(dir, h)
		for err == nil {
			if _, err = s.Trace("step", testTrace()); err == nil {
				_, err = fmt.Println("kept")
			}
		}
		os.Exit(3)
	}
	os.Exit(m.Run())
}

// A process killed in the middle of its work (SIGKILL, no last words) has lost
// nothing that it had been told was kept.
func TestKilledProcessKeepsWhatItReported(t *testing.T) {
	for _, after := range []int{1, 7, 25} {
		dir := filepath.Join(t.TempDir(), "job")
		cmd := exec.Command(os.Args[0])
		cmd.Env = append(os.Environ(), "SHEET_TEST_WRITE="+dir)
		out, err := cmd.StdoutPipe()
		if err != nil {
			t.Fatal(err)
		}
		if err := cmd.Start(); err != nil {
			t.Fatal(err)
		}
		kept := 0
		for lines := bufio.NewScanner(out); kept < after && lines.Scan(); kept++ {
		}
		if err := cmd.Process.Kill(); err != nil {
			t.Fatal(err)
		}
		if err := cmd.Wait(); err == nil || cmd.ProcessState.ExitCode() == 3 {
			t.Fatalf("the job was not killed but ended: %v", err)
		}
		r, problems := Open(dir)
		if r.Closed() || len(problems) == 0 {
			t.Errorf("after %d: passes for whole", after)
		}
		traces := r.Find(KindTrace, "")
		if kept < after || len(traces) < after {
			t.Errorf("%d entries were reported kept, %d are there", kept, len(traces))
		}
		for _, l := range traces {
			if _, err := r.Trace(l); err != nil {
				t.Error(err)
			}
		}
	}
}
