package pipeline

import (
	"net"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"time"
)

// TestNotify: a service manager hears of ready and stopping, and of stored work
// only where it asked this process for it.
func TestNotify(t *testing.T) {
	dir, err := os.MkdirTemp("", "n") // a socket's path has a limit
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = os.RemoveAll(dir) })
	path := filepath.Join(dir, "s")
	l, err := net.ListenUnixgram("unixgram", &net.UnixAddr{Name: path, Net: "unixgram"})
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	heard := func() string {
		t.Helper()
		if err := l.SetReadDeadline(time.Now().Add(20 * time.Millisecond)); err != nil {
			t.Fatal(err)
		}
		b := make([]byte, 100)
		n, err := l.Read(b)
		if err != nil {
			return ""
		}
		return string(b[:n])
	}
	t.Setenv("NOTIFY_SOCKET", path)
	for _, c := range []struct {
		usec, pid string
		tell      func()
		want      string
	}{
		{"", "", NotifyReady, "READY=1"},
		{"", "", NotifyStopping, "STOPPING=1"},
		{"", "", beat, ""},
		{"1000", "", beat, "WATCHDOG=1"},
		{"1000", strconv.Itoa(os.Getpid()), beat, "WATCHDOG=1"},
		{"1000", "1", beat, ""},
	} {
		t.Setenv("WATCHDOG_USEC", c.usec)
		t.Setenv("WATCHDOG_PID", c.pid)
		c.tell()
		if got := heard(); got != c.want {
			t.Errorf("watchdog %q for process %q: heard %q, want %q", c.usec, c.pid, got, c.want)
		}
	}
	t.Setenv("NOTIFY_SOCKET", filepath.Join(dir, "gone"))
	NotifyReady() // nobody listens: nothing happens
}
