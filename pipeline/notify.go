package pipeline

import (
	"net"
	"os"
	"strconv"
)

// NotifyReady tells the service manager, where there is one, that everything
// runs (the sd_notify protocol: one datagram to the socket in NOTIFY_SOCKET).
func NotifyReady() { notify("READY=1") }

// NotifyStopping tells it that the service ends by itself.
func NotifyStopping() { notify("STOPPING=1") }

// beat feeds the manager's watchdog, where one is set for this process. It is
// called after work was stored and at no other time: healthy means that work
// is stored, not that a loop is alive.
func beat() {
	if os.Getenv("WATCHDOG_USEC") == "" {
		return
	}
	if pid := os.Getenv("WATCHDOG_PID"); pid != "" && pid != strconv.Itoa(os.Getpid()) {
		return
	}
	notify("WATCHDOG=1")
}

func notify(state string) {
	path := os.Getenv("NOTIFY_SOCKET")
	if path == "" {
		return
	}
	if path[0] == '@' {
		path = "\x00" + path[1:]
	}
	c, err := net.DialUnix("unixgram", nil, &net.UnixAddr{Name: path, Net: "unixgram"})
	if err != nil {
		return // nobody listens; the service runs all the same
	}
	defer c.Close()
	_, _ = c.Write([]byte(state)) // a manager that went away is no reason to stop
}
