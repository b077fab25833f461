package serialport

import (
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"gainwright/link"
	"gainwright/link/linktest"
	"gainwright/link/ptyport"
)

// TestMain gives the tests a lock directory of their own, and plays the other
// process when it is asked to.
func TestMain(m *testing.M) {
	if dir := os.Getenv("HOLD_LOCKDIR"); dir != "" {
		lockDir = dir
		if _, err := Open(os.Getenv("HOLD_PORT"), 115200); err != nil {
			fmt.Println(err)
			os.Exit(1)
		}
		fmt.Println("held")
		io.Copy(io.Discard, os.Stdin) // until killed
	}
	dir, err := os.MkdirTemp("", "ports")
	if err != nil {
		panic(err)
	}
	lockDir = dir
	uucpLockDir = filepath.Join(dir, "uucp")
	os.Mkdir(uucpLockDir, 0o755)
	code := m.Run()
	os.RemoveAll(dir)
	os.Exit(code)
}

func pseudo(t *testing.T) (*ptyport.Master, string) {
	t.Helper()
	m, path, err := ptyport.Open()
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { m.Close() })
	return m, path
}

func open(t *testing.T, path string) *Port {
	t.Helper()
	p, err := Open(path, 115200)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { p.Close() })
	return p
}

func TestPortKeepsTheContract(t *testing.T) {
	if err := linktest.CheckPort(func() (link.Port, link.Port, error) {
		m, path, err := ptyport.Open()
		if err != nil {
			return nil, nil, err
		}
		p, err := Open(path, 115200)
		return p, m, err
	}); err != nil {
		t.Error(err)
	}
}

func TestOpenSaysWhatIsWrong(t *testing.T) {
	_, path := pseudo(t)
	dir := t.TempDir()
	file := filepath.Join(dir, "file")
	os.WriteFile(file, nil, 0o600)
	for _, c := range []struct {
		name, path string
		baud       int
		kind       error
		words      []string
	}{
		{"missing", filepath.Join(dir, "ttyUSB7"), 115200, ErrNoPort, []string{"ttyUSB7", "no such port", "gainwright ports"}},
		{"a file", file, 115200, ErrNotSerial, []string{"not a serial port", "gainwright ports"}},
		{"a directory", dir, 115200, ErrNotSerial, []string{"not a serial port"}},
		{"a device that is no terminal", "/dev/null", 115200, ErrNotSerial, []string{"not a serial port"}},
		{"rate 0", path, 0, ErrBaud, []string{"0 bit/s", "115200"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			p, err := Open(c.path, c.baud)
			if err == nil {
				p.Close()
				t.Fatal("opened")
			}
			var oe *OpenError
			if !errors.As(err, &oe) || !errors.Is(err, c.kind) || oe.Path != c.path {
				t.Errorf("error is %#v, want an OpenError of %v", err, c.kind)
			}
			for _, w := range c.words {
				if !strings.Contains(err.Error(), w) {
					t.Errorf("%q does not say %q", err, w)
				}
			}
		})
	}
	open(t, path) // no failure above left a lock behind
}

// The errors a test cannot provoke as root, by what the system says.
func TestSystemErrorsAreTranslated(t *testing.T) {
	for err, kind := range map[error]error{
		unix.EACCES: ErrPermission, unix.EPERM: ErrPermission, unix.EBUSY: ErrBusy,
		unix.ENOENT: ErrNoPort, unix.ENXIO: ErrNoPort, unix.ENODEV: ErrNoPort, unix.EIO: ErrNoPort,
		unix.ENOTTY: ErrNotSerial, unix.EMFILE: unix.EMFILE,
	} {
		if got := classify("/dev/ttyX", err); !errors.Is(got, kind) {
			t.Errorf("%v becomes %v, want %v", err, got, kind)
		}
	}
}

func TestPermissionRemedyNamesTheGroup(t *testing.T) {
	group, err := user.LookupGroupId("20") // dialout on Debian
	if err != nil {
		t.Skip("there is no group 20 here: ", err)
	}
	file := filepath.Join(t.TempDir(), "tty")
	os.WriteFile(file, nil, 0o600)
	if err := os.Chown(file, -1, 20); err != nil {
		t.Skip("only root may give files to groups: ", err)
	}
	if err := (&OpenError{Path: file, Err: ErrPermission}); !strings.Contains(err.Error(), "usermod -aG "+group.Name) {
		t.Errorf("%q does not name the group %s", err, group.Name)
	}
}

func TestSecondOpenNamesTheHolder(t *testing.T) {
	_, path := pseudo(t)
	first := open(t, path)
	alias := filepath.Join(t.TempDir(), "usb-board-if00")
	if err := os.Symlink(path, alias); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{path, alias} {
		_, err := Open(name, 115200)
		var oe *OpenError
		if !errors.As(err, &oe) || !errors.Is(err, ErrBusy) || oe.Holder == nil {
			t.Fatalf("second open of %s gives %v, want busy with a holder", name, err)
		}
		h := oe.Holder
		if h.PID != os.Getpid() || h.Program != filepath.Base(os.Args[0]) || time.Since(h.Since) > time.Minute {
			t.Errorf("holder is %+v, want this process", h)
		}
		if !strings.Contains(err.Error(), fmt.Sprint(os.Getpid())) || !strings.Contains(err.Error(), name) {
			t.Errorf("%q does not say who has what", err)
		}
	}
	first.Close()
	again := open(t, alias)
	if again.Path != alias || again.Device != path {
		t.Errorf("opened %q as %q, want %q as %q", again.Path, again.Device, alias, path)
	}
}

// A console that was killed must not keep the next one out.
func TestLockOfAKilledProcessIsFree(t *testing.T) {
	_, path := pseudo(t)
	other := exec.Command(os.Args[0])
	other.Env = append(os.Environ(), "HOLD_LOCKDIR="+lockDir, "HOLD_PORT="+path)
	stdin, err := other.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	defer stdin.Close()
	stdout, err := other.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := other.Start(); err != nil {
		t.Fatal(err)
	}
	said := make([]byte, 5)
	if _, err := io.ReadFull(stdout, said); err != nil || string(said) != "held\n" {
		t.Fatalf("other process says %q, %v", said, err)
	}
	_, err = Open(path, 115200)
	var oe *OpenError
	if !errors.As(err, &oe) || !errors.Is(err, ErrBusy) || oe.Holder == nil || oe.Holder.PID != other.Process.Pid {
		t.Errorf("open gives %v, want busy with process %d", err, other.Process.Pid)
	}
	other.Process.Kill()
	other.Wait()
	open(t, path)
}

func TestLocksOfOtherProgramsAreRespected(t *testing.T) {
	_, path := pseudo(t)
	file := filepath.Join(uucpLockDir, "LCK.."+filepath.Base(path))
	sleeper := exec.Command("sleep", "60")
	if err := sleeper.Start(); err != nil {
		t.Skip(err)
	}
	os.WriteFile(file, fmt.Appendf(nil, "%10d\n", sleeper.Process.Pid), 0o644)
	_, err := Open(path, 115200)
	if !errors.Is(err, ErrBusy) || !strings.Contains(err.Error(), "sleep") {
		t.Errorf("open gives %v, want busy with sleep", err)
	}
	sleeper.Process.Kill()
	sleeper.Wait()
	open(t, path) // its process has ended: the lock means nothing
}

func TestWhoHasFindsAProcessByItsFiles(t *testing.T) {
	_, path := pseudo(t)
	other := exec.Command("sh", "-c", "exec sleep 60 <"+path)
	if err := other.Start(); err != nil {
		t.Skip(err)
	}
	defer other.Wait()
	defer other.Process.Kill()
	for end := time.Now().Add(10 * time.Second); time.Now().Before(end); time.Sleep(time.Millisecond) {
		if h := whoHas(path); h != nil && h.Program == "sleep" {
			if h.PID != other.Process.Pid {
				t.Errorf("holder %+v, want process %d", h, other.Process.Pid)
			}
			return
		}
	}
	t.Error("not found")
}

// Anybody may write into a lock file; nothing of it may reach a terminal raw.
func TestHolderTextIsData(t *testing.T) {
	f, err := os.Create(filepath.Join(t.TempDir(), "lock"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	f.WriteString("pid x\nsince never\nprogram \x1b[31mred" + strings.Repeat("a", 600) + "\n")
	if s := readHolder(f).String(); strings.ContainsRune(s, 0x1b) || len(s) > 40 || !strings.HasPrefix(s, "[31mred") {
		t.Errorf("holder reads %q", s)
	}
}

func TestHangUpOnClose(t *testing.T) {
	for _, c := range []struct {
		lines Lines
		kept  bool
		words string
	}{
		{LinesQuiet, false, "hang-up on close is switched off"},
		{LinesLeave, true, "as the system has it"},
		{LinesAssert, false, "DTR could not be set"}, // a pseudo-terminal has none, and that must be said
	} {
		_, path := pseudo(t)
		setHUPCL(t, path)
		p, err := OpenWith(path, Options{Baud: 115200, Lines: c.lines})
		if err != nil {
			t.Fatal(err)
		}
		if !strings.Contains(p.Lines, c.words) || !strings.Contains(p.Lines, "raised DTR") {
			t.Errorf("%v: said %q, want %q", c.lines, p.Lines, c.words)
		}
		if kept := hupcl(t, path); kept != c.kept {
			t.Errorf("%v: HUPCL is %v, want %v", c.lines, kept, c.kept)
		}
		p.Close()
	}
}

func setHUPCL(t *testing.T, path string) {
	c, err := openControl(path)
	if err != nil {
		t.Fatal(err)
	}
	defer c.close()
	tio, err := unix.IoctlGetTermios(c.fd, unix.TCGETS)
	if err != nil {
		t.Fatal(err)
	}
	tio.Cflag |= unix.HUPCL
	if err := unix.IoctlSetTermios(c.fd, unix.TCSETS, tio); err != nil {
		t.Fatal(err)
	}
}

func hupcl(t *testing.T, path string) bool {
	f, err := os.Open(path)
	if err != nil {
		t.Skip("a second open is only allowed to root: ", err)
	}
	defer f.Close()
	tio, err := unix.IoctlGetTermios(int(f.Fd()), unix.TCGETS)
	if err != nil {
		t.Fatal(err)
	}
	return tio.Cflag&unix.HUPCL != 0
}

func TestUnplugIsReported(t *testing.T) {
	m, path := pseudo(t)
	p := open(t, path)
	m.Close()
	if _, err := p.Read(make([]byte, 1)); !errors.Is(err, ErrGone) {
		t.Errorf("read gives %v, want ErrGone", err)
	}
	if _, err := p.Write([]byte("x")); !errors.Is(err, ErrGone) {
		t.Errorf("write gives %v, want ErrGone", err)
	}
}

// A Write that hangs must not keep Close waiting, and the lock must be free.
func TestCloseDoesNotWaitForAHangingWrite(t *testing.T) {
	_, path := pseudo(t)
	p := open(t, path)
	go func() {
		for {
			if _, err := p.Write(make([]byte, 1<<16)); err != nil {
				return
			}
		}
	}()
	for end := time.Now().Add(10 * time.Second); p.use.TryLock(); time.Sleep(time.Millisecond) {
		p.use.Unlock()
		if time.Now().After(end) {
			t.Fatal("write does not hang")
		}
	}
	done := make(chan struct{})
	go func() { p.Close(); close(done) }()
	select {
	case <-done:
	case <-time.After(10 * time.Second):
		t.Fatal("close waits for the write")
	}
	open(t, path)
}
