package firmware_test

import (
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// Inputs of a seeded generator through the fuzz target, with sanitizers. The
// target aborts where the output is on outside of motion, a cut byte leaves it
// on, or a line is too long. README.md says how to fuzz guided by coverage.
func TestSeededFuzz(t *testing.T) {
	need(t, "gcc")
	for _, variant := range []string{"float", "fixed"} {
		out := filepath.Join(buildDir, "fuzz-"+variant)
		args := append([]string{"-Icore", "-Ihost", "-DFUZZ_MAIN", "-o", out}, warnings...)
		args = append(args, variants[variant]...)
		args = append(args, glob(t, "core/*.c", "host/fuzz/*.c")...)
		if msg, err := exec.Command("gcc", args...).CombinedOutput(); err != nil {
			t.Fatalf("gcc: %v\n%s", err, msg)
		}
		msg, err := exec.Command(out, "-n", "4000", "7").CombinedOutput()
		if err != nil {
			t.Fatalf("%s: %v\n%s", variant, err, msg)
		}
		var driven int
		if _, err := fmt.Sscanf(string(msg), "driven %d", &driven); err != nil || driven < 1000 {
			t.Errorf("%s: %q: the inputs hardly ever drove the motor", variant, msg)
		}
	}
}

// seeds begin a guided search at what a console says, so that it does not have to
// find the verbs first; 128 + length is a line whose CRC the target adds.
func seeds(t *testing.T, dir string) {
	t.Helper()
	line := func(s string) string { return string([]byte{byte(128 + len(s))}) + s }
	for i, s := range []string{
		"\xfd\xfe\x00\x05\xc8\xfe\x02\x05\xc8\xff",
		"\xfd\xfe\x02\x85\xd0\xfe\x03\x00\xc1\x03id\n\x02\x18\n",
		"\xfd\xc0\x05hb 1 \x02\x18\n\xc0" + line("log 1 0"),
		line("id 1") + line("tel 2") + line("stop 3") + "\xc0" + line("log 4 0"),
		line("lim 1 get 2") + line("lim 2 set 0 41200000") + line("lim 3 crc") + line("lim 4 use 29B1"),
		line("gain 1 get run 0") + line("gain 2 set 0 3F800000") + line("gain 3 use 0000") + line("gain 4 store 0000") + line("gain 5 crc store"),
		line("cap 1 now 1 20") + "\xd0" + line("cap 2 get 0") + line("cap 3 crc") + line("cap 4 arm 2 5 20") + line("cap 5 state"),
		line("rate 1 200 x tu") + "\xe0" + line("rate 2 50 d tu") + "\xe0" + line("nonce 3") + line("dis 4") + line("reset 5") + line("in 6"),
		"\xfd\xfe\x10\x05\xc8" + line("exp 1 state") + "\xc8\xfe\x30\x05\xd0" + line("exp 2 prbs 0000 500 5 3 7"),
	} {
		if err := os.WriteFile(filepath.Join(dir, fmt.Sprint("seed", i)), []byte(s), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// TestGuidedFuzz searches for so many runs, or with GAINWRIGHT_LONG=1 for ten
// minutes, led by what part of the core an input reaches.
func TestGuidedFuzz(t *testing.T) {
	need(t, "clang")
	out := filepath.Join(buildDir, "fuzz-guided")
	args := append([]string{"-O1", "-g", "-fsanitize=fuzzer,address,undefined", "-fno-sanitize-recover=all", "-Icore", "-Ihost", "-o", out}, warnings...)
	args = append(args, glob(t, "core/*.c", "host/fuzz/*.c")...)
	if msg, err := exec.Command("clang", args...).CombinedOutput(); err != nil {
		if strings.Contains(string(msg), "libclang_rt") {
			t.Skip("clang has no fuzzer: libclang-rt-14-dev is not installed")
		}
		t.Fatalf("clang: %v\n%s", err, msg)
	}
	corpus, found := t.TempDir(), t.TempDir()
	seeds(t, corpus)
	how := []string{"-runs=4000", "-seed=1"}
	if os.Getenv("GAINWRIGHT_LONG") != "" {
		how = []string{"-max_total_time=600"}
	}
	args = append(how, "-max_len=600", "-timeout=20", "-print_final_stats=1", "-artifact_prefix="+found+"/", corpus)
	msg, err := exec.Command(out, args...).CombinedOutput()
	if err != nil {
		files, _ := filepath.Glob(found + "/*")
		for _, f := range files {
			b, _ := os.ReadFile(f)
			t.Errorf("input: %q", b)
		}
		t.Fatalf("%v\n%s", err, msg)
	}
	// "#4000 DONE cov: 812 ft: …": places of the core that were reached.
	_, after, _ := strings.Cut(string(msg), "DONE")
	var cov int
	if _, err := fmt.Sscanf(strings.TrimSpace(after), "cov: %d", &cov); err != nil || cov < 400 {
		t.Errorf("%d places reached (%v):\n%s", cov, err, msg)
	}
	t.Logf("%d places reached", cov)
}
