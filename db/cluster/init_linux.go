package cluster

import (
	"context"
	"errors"
	"fmt"
	"net"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"sort"
	"strings"
	"syscall"
)

// initialise makes the server's files when there are none. It works beside the
// final place and renames, so that a crash leaves either nothing or all.
func (p *place) initialise(ctx context.Context, cfg Config) error {
	if _, err := os.Stat(filepath.Join(p.pg, "PG_VERSION")); err == nil {
		return nil
	}
	if entries, err := os.ReadDir(p.pg); err == nil && len(entries) > 0 {
		return fmt.Errorf("%s has files but no PG_VERSION: it is not a whole PostgreSQL data folder; nothing was changed. Restore it from a backup or move it away", p.pg)
	} else if err != nil && !errors.Is(err, os.ErrNotExist) {
		return fmt.Errorf("looking into %s: %w", p.pg, err)
	}
	// A killed program leaves its initdb running for a moment, so each try has
	// a folder of its own; what an earlier one left is cleared as far as it lets us.
	if left, err := filepath.Glob(p.pg + ".new*"); err == nil {
		for _, d := range left {
			_ = os.RemoveAll(d) // still being written: the next start clears it
		}
	}
	fresh := fmt.Sprintf("%s.new%d", p.pg, os.Getpid())
	if err := p.ownDir(fresh); err != nil {
		return err
	}
	args := []string{"-D", fresh, "-E", "UTF8", "--no-locale", "-k", "-A", "peer", "-U", superuser}
	if cfg.Settings["fsync"] == "off" {
		args = append(args, "--no-sync")
	}
	cmd := exec.CommandContext(ctx, filepath.Join(p.bin.dir, "initdb"), args...)
	cmd.Dir = fresh
	cmd.Env = cleanEnv()
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true, Credential: p.credential()}
	if out, err := cmd.CombinedOutput(); err != nil {
		return fmt.Errorf("initialising the private server in %s: %w: %s", p.pg, err, lastLines(string(out), 4))
	}
	if err := os.Remove(p.pg); err != nil && !errors.Is(err, os.ErrNotExist) {
		return fmt.Errorf("making room for %s: %w", p.pg, err)
	}
	if err := os.Rename(fresh, p.pg); err != nil {
		return fmt.Errorf("putting the initialised server in place: %w", err)
	}
	return nil
}

// credential is nil when no change of user is needed.
func (p *place) credential() *syscall.Credential {
	if !p.asRoot {
		return nil
	}
	return &syscall.Credential{Uid: uint32(p.uid), Gid: uint32(p.gid)}
}

// writeAccess says who may connect: root and the account that runs the server
// as its owner, by peer; members of the reader group with a password.
func (p *place) writeAccess(cfg Config) error {
	hba := "local all all peer map=pkvigil\n"
	hba = "local all +pkvigil_reader scram-sha-256\n" + hba
	if cfg.Listen != "" {
		hba += "host all +pkvigil_reader all scram-sha-256\n"
	}
	// The reader group is matched first, and superusers are members of every
	// group for that purpose, so the owner's own line must come before it.
	hba = "local all " + superuser + " peer map=pkvigil\n" + hba
	names := map[string]bool{"root": true, p.account: true}
	if u, err := user.Current(); err == nil {
		names[u.Username] = true
	}
	var ident strings.Builder
	for _, n := range sortedKeys(names) {
		fmt.Fprintf(&ident, "pkvigil %q %s\n", n, superuser)
	}
	if err := p.replace("pg_hba.conf", hba); err != nil {
		return err
	}
	return p.replace("pg_ident.conf", ident.String())
}

// replace writes a file of the server's folder whole or not at all.
func (p *place) replace(name, text string) error {
	path := filepath.Join(p.pg, name)
	if old, err := os.ReadFile(path); err == nil && string(old) == text {
		return nil
	}
	tmp := path + ".new"
	if err := os.WriteFile(tmp, []byte(text), 0o600); err != nil {
		return fmt.Errorf("writing %s: %w", path, err)
	}
	if p.asRoot {
		if err := os.Chown(tmp, p.uid, p.gid); err != nil {
			return fmt.Errorf("giving %s to %s: %w", path, p.account, err)
		}
	}
	if err := os.Rename(tmp, path); err != nil {
		return fmt.Errorf("writing %s: %w", path, err)
	}
	return nil
}

// arguments are the server's command line: durable, local, quiet.
func (p *place) arguments(cfg Config) []string {
	set := map[string]string{
		"listen_addresses":                    "",
		"port":                                p.port,
		"unix_socket_directories":             p.run,
		"unix_socket_permissions":             "0700",
		"fsync":                               "on",
		"synchronous_commit":                  "on",
		"full_page_writes":                    "on",
		"wal_level":                           "minimal",
		"max_wal_senders":                     "0",
		"wal_compression":                     "on",
		"shared_buffers":                      "256MB",
		"max_wal_size":                        "2GB",
		"checkpoint_timeout":                  "15min",
		"max_connections":                     "60",
		"jit":                                 "off",
		"max_parallel_workers_per_gather":     "0", // cores are for fits, and containers have little /dev/shm
		"timezone":                            "UTC",
		"log_timezone":                        "UTC",
		"log_line_prefix":                     "%m [%p] ",
		"log_checkpoints":                     "off",
		"log_parameter_max_length_on_error":   "0",
		"password_encryption":                 "scram-sha-256",
		"max_locks_per_transaction":           "128",
		"idle_in_transaction_session_timeout": "10min",
	}
	if cfg.Listen != "" {
		host, _, _ := net.SplitHostPort(cfg.Listen) // checked by findPlace
		set["listen_addresses"] = host
	}
	for k, v := range cfg.Settings {
		set[k] = v
	}
	args := []string{"-D", p.pg}
	for _, k := range sortedKeys(set) {
		args = append(args, "-c", k+"="+set[k])
	}
	return args
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}

// cleanEnv keeps the server and its tools from being steered by PG variables.
func cleanEnv() []string {
	env := []string{"LC_ALL=C", "TZ=UTC"}
	for _, name := range []string{"PATH", "TMPDIR", "LD_LIBRARY_PATH"} {
		if v := os.Getenv(name); v != "" {
			env = append(env, name+"="+v)
		}
	}
	return env
}

func lastLines(text string, n int) string {
	lines := strings.Split(strings.TrimSpace(text), "\n")
	if len(lines) > n {
		lines = lines[len(lines)-n:]
	}
	return strings.Join(lines, " | ")
}
