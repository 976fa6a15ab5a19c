package cluster

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"
)

// orphanTime is how long a server left by a killed program may take to shut down.
const orphanTime = 60 * time.Second

// lock makes this process the owner of the data folder's server. The lock goes
// away with the process, however it ends.
func (p *place) lock() (free func(), err error) {
	path := filepath.Join(p.data, lockName)
	f, err := os.OpenFile(path, os.O_CREATE|os.O_RDWR, 0o644)
	if err != nil {
		return nil, fmt.Errorf("opening the lock of the data folder: %w", err)
	}
	for try := 0; ; try++ {
		err = syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB)
		if err == nil || try == 5 {
			break
		}
		time.Sleep(lookEvery) // a passing Status holds a shared lock for an instant
	}
	if err != nil {
		owner, _ := os.ReadFile(path) // only for the sentence
		f.Close()
		if errors.Is(err, syscall.EWOULDBLOCK) {
			return nil, fmt.Errorf("%s (process %s): %w", p.data, strings.TrimSpace(string(owner)), ErrInUse)
		}
		return nil, fmt.Errorf("locking %s: %w", path, err)
	}
	if err := f.Truncate(0); err == nil {
		_, err = f.WriteAt([]byte(strconv.Itoa(os.Getpid())+"\n"), 0)
		if err != nil {
			f.Close()
			return nil, fmt.Errorf("writing %s: %w", path, err)
		}
	}
	return func() {
		_ = f.Truncate(0) // closing frees the lock even when this fails
		f.Close()
	}, nil
}

const lockName = "pkvigil.lock"

// owner is the process that holds the lock of a data folder, 0 when none.
func owner(data string) int {
	path := filepath.Join(data, lockName)
	f, err := os.Open(path)
	if err != nil {
		return 0
	}
	defer f.Close()
	if err := syscall.Flock(int(f.Fd()), syscall.LOCK_SH|syscall.LOCK_NB); err == nil {
		return 0 // nobody has it; closing gives ours back
	}
	raw, err := os.ReadFile(path)
	if err != nil {
		return 0
	}
	pid, err := strconv.Atoi(strings.TrimSpace(string(raw)))
	if err != nil {
		return 0
	}
	return pid
}

// takeOver clears what an earlier life left: it stops an orphaned server,
// waits for orphaned children, and removes a process file, socket or socket
// lock that would be mistaken for a living server. The process file is left
// alone whenever the server itself will see that it is stale, because it also
// names the shared memory to check.
func (p *place) takeOver(ctx context.Context, cfg Config) error {
	f, err := readPIDFile(p.pg)
	switch {
	case errors.Is(err, os.ErrNotExist):
	case err != nil && len(processesOf(p.pg)) > 0:
		return err
	case err != nil:
		// Cut off by a crash or a full disk, and nobody runs here.
		if err := os.Remove(filepath.Join(p.pg, "postmaster.pid")); err != nil {
			return fmt.Errorf("removing a broken process file: %w", err)
		}
	case serves(f.pid, p.pg):
		cfg.say("a private server (process %d) outlived the program that started it; stopping it", f.pid)
		if err := p.stopOrphan(ctx, f.pid); err != nil {
			return err
		}
	case alive(f.pid):
		// A zombie, or a stranger that was given the number: the server would refuse to start.
		if err := os.Remove(filepath.Join(p.pg, "postmaster.pid")); err != nil && !errors.Is(err, os.ErrNotExist) {
			return fmt.Errorf("removing a stale process file: %w", err)
		}
	}
	if err := p.waitChildren(ctx); err != nil {
		return err
	}
	socket := filepath.Join(p.run, ".s.PGSQL."+p.port)
	for _, path := range []string{socket, socket + ".lock"} {
		if err := os.Remove(path); err != nil && !errors.Is(err, os.ErrNotExist) {
			return fmt.Errorf("removing a stale socket: %w", err)
		}
	}
	return nil
}

// stopOrphan ends a server nobody owns: fast, then immediate.
func (p *place) stopOrphan(ctx context.Context, pid int) error {
	for _, sig := range []syscall.Signal{syscall.SIGINT, syscall.SIGQUIT} {
		if err := syscall.Kill(pid, sig); err != nil && !errors.Is(err, syscall.ESRCH) {
			return fmt.Errorf("stopping the orphaned server (process %d): %w", pid, err)
		}
		patience, cancel := context.WithTimeout(ctx, orphanTime)
		gone := waitGone(patience, pid, p.pg)
		cancel()
		if gone {
			return nil
		}
		if ctx.Err() != nil {
			break
		}
	}
	return fmt.Errorf("the server left in %s (process %d) does not end; stop it with pg_ctl stop -D %s", p.pg, pid, p.pg)
}

// waitChildren waits for backends whose postmaster was killed; they end by themselves.
func (p *place) waitChildren(ctx context.Context) error {
	patience, cancel := context.WithTimeout(ctx, orphanTime)
	defer cancel()
	for _, pid := range processesOf(p.pg) {
		if !waitGone(patience, pid, p.pg) {
			return fmt.Errorf("process %d of an earlier server in %s does not end; end it by hand, never with kill -9 of all", pid, p.pg)
		}
	}
	return nil
}

// processesOf lists living processes whose working directory is the data
// directory and that run our kind of program.
func processesOf(pgdata string) []int {
	entries, err := os.ReadDir("/proc")
	if err != nil {
		return nil
	}
	var pids []int
	for _, e := range entries {
		if pid, err := strconv.Atoi(e.Name()); err == nil && serves(pid, pgdata) {
			pids = append(pids, pid)
		}
	}
	return pids
}

// serves says whether a living process is a server process of this data
// directory: it works there, its program is called postgres, and it is no zombie.
func serves(pid int, pgdata string) bool {
	dir := filepath.Join("/proc", strconv.Itoa(pid))
	cwd, err := os.Readlink(filepath.Join(dir, "cwd"))
	if err != nil || !sameDir(cwd, pgdata) {
		return false
	}
	exe, err := os.Readlink(filepath.Join(dir, "exe"))
	if err != nil {
		return false
	}
	name := strings.TrimSuffix(filepath.Base(exe), " (deleted)") // upgraded while running
	return name == "postgres" && alive(pid) && !zombie(pid)
}

func sameDir(a, b string) bool {
	if a == b {
		return true
	}
	fa, err := os.Stat(a)
	if err != nil {
		return false
	}
	fb, err := os.Stat(b)
	return err == nil && os.SameFile(fa, fb)
}

func alive(pid int) bool {
	err := syscall.Kill(pid, 0)
	return err == nil || errors.Is(err, syscall.EPERM)
}

func zombie(pid int) bool {
	raw, err := os.ReadFile(filepath.Join("/proc", strconv.Itoa(pid), "stat"))
	if err != nil {
		return false
	}
	// The name in parentheses may hold anything, so look behind the last one.
	i := strings.LastIndexByte(string(raw), ')')
	return i >= 0 && strings.HasPrefix(strings.TrimSpace(string(raw[i+1:])), "Z")
}

// A pidFile is what postmaster.pid says.
type pidFile struct {
	pid       int
	port      string
	socketDir string
	status    string
}

func readPIDFile(pgdata string) (pidFile, error) {
	path := filepath.Join(pgdata, "postmaster.pid")
	raw, err := os.ReadFile(path)
	if err != nil {
		return pidFile{}, fmt.Errorf("reading the server's process file: %w", err)
	}
	lines := strings.Split(string(raw), "\n")
	pid, err := strconv.Atoi(strings.TrimSpace(lines[0]))
	if err != nil || pid <= 0 {
		return pidFile{}, fmt.Errorf("%s: found %q, expected a process number; remove the file if no postgres runs in %s", path, lines[0], pgdata)
	}
	line := func(i int) string {
		if i < len(lines) {
			return strings.TrimSpace(lines[i])
		}
		return ""
	}
	return pidFile{pid: pid, port: line(3), socketDir: line(4), status: line(7)}, nil
}

// Status looks at a data folder without starting anything.
func Status(dataDir string) (State, error) {
	data, err := filepath.Abs(dataDir)
	if err != nil {
		return State{}, fmt.Errorf("data folder %q: %w", dataDir, err)
	}
	var st State
	pg := filepath.Join(data, "pg")
	version, err := os.ReadFile(filepath.Join(pg, "PG_VERSION"))
	if errors.Is(err, os.ErrNotExist) {
		return st, nil
	}
	if err != nil {
		return st, fmt.Errorf("looking at the private server's data: %w; run the command as root or as the account that runs the service", err)
	}
	st.Initialised, st.Version = true, strings.TrimSpace(string(version))
	st.Owner = owner(data)
	f, err := readPIDFile(pg)
	if errors.Is(err, os.ErrNotExist) {
		return st, nil
	}
	if err != nil {
		return st, err
	}
	if serves(f.pid, pg) && f.status == "ready" {
		st.Running, st.PID, st.SocketDir, st.port = true, f.pid, f.socketDir, f.port
		st.URL = socketURL(f.socketDir, f.port)
	}
	return st, nil
}
