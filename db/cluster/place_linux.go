package cluster

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"net"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strconv"
	"syscall"
)

// maxSocketDir is the longest directory for which the socket's whole path
// (directory, "/.s.PGSQL.5432") stays within the kernel's 107 bytes.
func (p *place) maxSocketDir() int { return 107 - len("/.s.PGSQL."+p.port) }

// findPlace settles all paths and the account, making directories as needed.
func findPlace(cfg Config) (place, error) {
	data, err := filepath.Abs(cfg.DataDir)
	if err != nil {
		return place{}, fmt.Errorf("data folder %q: %w", cfg.DataDir, err)
	}
	p := place{data: data, pg: filepath.Join(data, "pg"), logFile: logFileOf(data), port: socketPort}
	if _, prt, err := net.SplitHostPort(cfg.Listen); err == nil {
		p.port = prt
	} else if cfg.Listen != "" {
		return place{}, fmt.Errorf("address %q for readers: %w; expected for instance 127.0.0.1:5433", cfg.Listen, err)
	}
	found, err := findBinaries(cfg.BinDir)
	if err != nil {
		return place{}, err
	}
	if p.bin, err = choose(found, p.pg); err != nil {
		return place{}, err
	}
	if err := p.findAccount(cfg.Account); err != nil {
		return place{}, err
	}
	if err := os.MkdirAll(data, 0o755); err != nil {
		return place{}, fmt.Errorf("making the data folder: %w", err)
	}
	if p.asRoot {
		if err := p.checkParents(data); err != nil {
			return place{}, err
		}
	}
	if err := p.ownDir(filepath.Join(data, "log")); err != nil {
		return place{}, err
	}
	if p.run, err = p.runDir(cfg.RunDir); err != nil {
		return place{}, err
	}
	return p, nil
}

// findAccount decides who the server runs as. PostgreSQL refuses to run as root.
func (p *place) findAccount(wanted string) error {
	p.uid, p.gid = os.Geteuid(), os.Getegid()
	if p.uid != 0 {
		u, err := user.LookupId(strconv.Itoa(p.uid))
		if err != nil {
			return fmt.Errorf("user number %d has no entry in /etc/passwd, which initdb needs: run pkvigil as a named user, or add one: %w", p.uid, err)
		}
		p.account = u.Username
		return nil
	}
	p.asRoot = true
	// The account that owns existing data stays, whatever has been installed since.
	if fi, err := os.Stat(p.pg); err == nil && wanted == "" {
		if st, ok := fi.Sys().(*syscall.Stat_t); ok && st.Uid != 0 {
			if u, err := user.LookupId(strconv.Itoa(int(st.Uid))); err == nil {
				return p.take(u)
			}
		}
	}
	if wanted != "" {
		u, err := user.Lookup(wanted)
		if err != nil {
			return fmt.Errorf("account %q for the private server does not exist: make it (useradd --system %s) or leave the setting out: %w", wanted, wanted, err)
		}
		if u.Uid == "0" {
			return fmt.Errorf("account %q is root, and PostgreSQL refuses to run as root: name another", wanted)
		}
		return p.take(u)
	}
	for _, name := range []string{"postgres", superuser} {
		if u, err := user.Lookup(name); err == nil {
			return p.take(u)
		}
	}
	if u, err := p.makeAccount(); err == nil {
		return p.take(u)
	}
	u, err := user.Lookup("nobody")
	if err != nil {
		return fmt.Errorf("no account to run the private server as: make one (useradd --system %s): %w", superuser, err)
	}
	return p.take(u)
}

func (p *place) take(u *user.User) error {
	uid, err := strconv.Atoi(u.Uid)
	if err != nil {
		return fmt.Errorf("account %s: user number %q: %w", u.Username, u.Uid, err)
	}
	gid, err := strconv.Atoi(u.Gid)
	if err != nil {
		return fmt.Errorf("account %s: group number %q: %w", u.Username, u.Gid, err)
	}
	p.account, p.uid, p.gid = u.Username, uid, gid
	return nil
}

// makeAccount makes a system user without home or shell.
func (p *place) makeAccount() (*user.User, error) {
	add, err := exec.LookPath("useradd")
	if err != nil {
		return nil, fmt.Errorf("making account %s: %w", superuser, err)
	}
	if out, err := exec.Command(add, "--system", "--no-create-home", "--home-dir", "/nonexistent", "--shell", "/usr/sbin/nologin", superuser).CombinedOutput(); err != nil {
		return nil, fmt.Errorf("making account %s: %w: %s", superuser, err, out)
	}
	return user.Lookup(superuser)
}

// checkParents makes sure that the account may pass through every folder above dir, dir included.
func (p *place) checkParents(dir string) error {
	for d := dir; ; d = filepath.Dir(d) {
		fi, err := os.Stat(d)
		if err != nil {
			return fmt.Errorf("looking at %s: %w", d, err)
		}
		st, ok := fi.Sys().(*syscall.Stat_t)
		if ok && !mayEnter(fi.Mode(), int(st.Uid), int(st.Gid), p.uid, p.gid) {
			return fmt.Errorf("account %s, which runs the private server, may not enter %s (%v): put the data folder below a folder everybody may pass, for instance /var/lib/pkvigil, or allow it (chmod o+x %s)", p.account, d, fi.Mode(), d)
		}
		if d == filepath.Dir(d) {
			return nil
		}
	}
}

func mayEnter(mode os.FileMode, owner, group, uid, gid int) bool {
	switch {
	case owner == uid:
		return mode&0o100 != 0
	case group == gid:
		return mode&0o010 != 0
	}
	return mode&0o001 != 0
}

// ownDir makes a directory that only the account may enter, and refuses one that belongs to somebody else.
func (p *place) ownDir(dir string) error {
	if err := os.MkdirAll(filepath.Dir(dir), 0o755); err != nil {
		return fmt.Errorf("making %s: %w", filepath.Dir(dir), err)
	}
	err := os.Mkdir(dir, 0o700)
	if err != nil && !errors.Is(err, os.ErrExist) {
		return fmt.Errorf("making %s: %w", dir, err)
	}
	fi, err := os.Lstat(dir)
	if err != nil {
		return fmt.Errorf("looking at %s: %w", dir, err)
	}
	st, ok := fi.Sys().(*syscall.Stat_t)
	if !fi.IsDir() || !ok {
		return fmt.Errorf("%s is in the way: expected a folder", dir)
	}
	if int(st.Uid) != p.uid {
		if !p.asRoot || st.Uid != 0 {
			return fmt.Errorf("%s belongs to user number %d, expected %s: remove it or choose another folder", dir, st.Uid, p.account)
		}
		if err := os.Lchown(dir, p.uid, p.gid); err != nil {
			return fmt.Errorf("giving %s to %s: %w", dir, p.account, err)
		}
	}
	if fi.Mode().Perm() != 0o700 {
		if err := os.Chmod(dir, 0o700); err != nil {
			return fmt.Errorf("closing %s to others: %w", dir, err)
		}
	}
	return nil
}

// runDir picks the socket's directory: the configured one, else one below the
// data folder, else a short one named by a hash of it.
func (p *place) runDir(wanted string) (string, error) {
	if wanted != "" {
		dir, err := filepath.Abs(wanted)
		if err != nil {
			return "", fmt.Errorf("socket folder %q: %w", wanted, err)
		}
		if len(dir) > p.maxSocketDir() {
			return "", fmt.Errorf("socket folder %s is %d bytes long, expected at most %d: choose a shorter one", dir, len(dir), p.maxSocketDir())
		}
		return dir, p.ownDir(dir)
	}
	if dir := filepath.Join(p.data, "run"); len(dir) <= p.maxSocketDir() {
		return dir, p.ownDir(dir)
	}
	sum := sha256.Sum256([]byte(p.data))
	name := fmt.Sprintf("pkvigil-%d-%x", p.uid, sum[:6])
	candidates := []string{"/run", os.TempDir(), "/tmp"}
	if x := os.Getenv("XDG_RUNTIME_DIR"); x != "" && !p.asRoot {
		candidates[0] = x
	}
	var last error
	for _, c := range candidates {
		dir := filepath.Join(c, name)
		if len(dir) > p.maxSocketDir() || !filepath.IsAbs(dir) {
			continue
		}
		if last = p.ownDir(dir); last == nil {
			return dir, nil
		}
	}
	return "", fmt.Errorf("no folder for the socket: %w", last)
}
