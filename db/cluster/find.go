package cluster

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"sort"
	"strconv"
	"strings"
)

// binaries are one installed major version of the server.
type binaries struct {
	dir   string
	major int
}

// howToInstall ends every error about absent binaries.
const howToInstall = "install the server package (Debian, Ubuntu: apt-get install postgresql; Fedora: dnf install postgresql-server; Alpine: apk add postgresql), or name a running server's URL in the settings"

// findBinaries gives the installed versions, newest first.
func findBinaries(explicit string) ([]binaries, error) {
	var dirs []string
	if explicit != "" {
		dirs = []string{explicit}
	} else {
		for _, pattern := range []string{"/usr/lib/postgresql/*/bin", "/usr/pgsql-*/bin", "/usr/libexec/postgresql*", "/usr/local/pgsql/bin", "/usr/local/lib/postgresql/bin"} {
			found, _ := filepath.Glob(pattern) // a constant pattern cannot be malformed
			dirs = append(dirs, found...)
		}
		if p, err := exec.LookPath("postgres"); err == nil {
			dirs = append(dirs, filepath.Dir(p))
		}
		if p, err := exec.LookPath("pg_config"); err == nil {
			if out, err := exec.Command(p, "--bindir").Output(); err == nil {
				dirs = append(dirs, strings.TrimSpace(string(out)))
			}
		}
	}
	seen := map[string]bool{}
	var found []binaries
	for _, d := range dirs {
		if seen[d] || !executable(filepath.Join(d, "postgres")) || !executable(filepath.Join(d, "initdb")) {
			continue
		}
		seen[d] = true
		major, err := majorOf(filepath.Join(d, "postgres"))
		if err != nil {
			continue // a broken installation beside a good one does not matter
		}
		found = append(found, binaries{dir: d, major: major})
	}
	if len(found) == 0 {
		where := "/usr/lib/postgresql/*/bin, PATH and pg_config"
		if explicit != "" {
			where = explicit
		}
		return nil, fmt.Errorf("no PostgreSQL server binaries (initdb and postgres) in %s: %s", where, howToInstall)
	}
	sort.SliceStable(found, func(i, j int) bool { return found[i].major > found[j].major })
	return found, nil
}

func executable(path string) bool {
	fi, err := os.Stat(path)
	return err == nil && fi.Mode().IsRegular() && fi.Mode()&0o111 != 0
}

// majorOf reads the major version from "postgres (PostgreSQL) 15.18 ...".
func majorOf(postgres string) (int, error) {
	out, err := exec.Command(postgres, "--version").Output()
	if err != nil {
		return 0, fmt.Errorf("asking %s for its version: %w", postgres, err)
	}
	return parseMajor(string(out))
}

func parseMajor(text string) (int, error) {
	_, rest, ok := strings.Cut(text, "(PostgreSQL) ")
	if !ok {
		return 0, fmt.Errorf("found %q, expected a PostgreSQL version", strings.TrimSpace(text))
	}
	digits := rest
	if i := strings.IndexFunc(rest, func(r rune) bool { return r < '0' || r > '9' }); i >= 0 {
		digits = rest[:i]
	}
	n, err := strconv.Atoi(digits)
	if err != nil {
		return 0, fmt.Errorf("found version %q, expected a number", strings.TrimSpace(rest))
	}
	return n, nil
}

// minMajor is the oldest version the schema is written for.
const minMajor = 15

// choose picks the binaries for a data directory: those of the version that
// wrote it, else the newest for a new one.
func choose(found []binaries, pgdata string) (binaries, error) {
	raw, err := os.ReadFile(filepath.Join(pgdata, "PG_VERSION"))
	if errors.Is(err, os.ErrNotExist) {
		if found[0].major < minMajor {
			return binaries{}, fmt.Errorf("newest PostgreSQL server found is version %d in %s, expected %d or newer: %s", found[0].major, found[0].dir, minMajor, howToInstall)
		}
		return found[0], nil
	}
	if err != nil {
		return binaries{}, fmt.Errorf("reading the version of %s: %w", pgdata, err)
	}
	want, err := strconv.Atoi(strings.TrimSpace(string(raw)))
	if err != nil {
		return binaries{}, fmt.Errorf("%s/PG_VERSION: found %q, expected a number; restore the folder from a backup", pgdata, raw)
	}
	var have []string
	for _, b := range found {
		if b.major == want {
			return b, nil
		}
		have = append(have, strconv.Itoa(b.major))
	}
	return binaries{}, fmt.Errorf("the data in %[1]s were written by PostgreSQL %[2]d, but installed are the server binaries of version %[3]s; nothing was changed. "+
		"Either install version %[2]d again (apt-get install postgresql-%[2]d), or move the data over: with version %[2]d start the server once, "+
		"dump with its pg_dump (pg_dump -Fc -h SOCKETDIR -U %[4]s -f pkvigil.dump %[5]s), set the folder aside (mv %[1]s %[1]s.%[2]d), start pkvigil with the new version, "+
		"stop it, and restore with pg_restore -h SOCKETDIR -U %[4]s -d %[5]s --clean --if-exists pkvigil.dump",
		pgdata, want, strings.Join(have, ", "), superuser, database)
}
