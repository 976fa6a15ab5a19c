# Sourced by try.sh and test.sh: makes sure that Go and the PostgreSQL server
# binaries are there, and says how to get them where it cannot install them.

say() { printf '%s\n' "$*" >&2; }

find_postgres() {
  local d
  for d in $(ls -d /usr/lib/postgresql/*/bin /usr/pgsql-*/bin /usr/local/pgsql/bin /opt/homebrew/opt/postgresql*/bin 2>/dev/null | sort -V -r); do
    [ -x "$d/postgres" ] && [ -x "$d/initdb" ] && return 0
  done
  command -v postgres >/dev/null 2>&1 && command -v initdb >/dev/null 2>&1
}

as_root() {
  if [ "$(id -u)" -eq 0 ]; then
    "$@"
  elif command -v sudo >/dev/null 2>&1; then
    say "installing needs administrator rights: sudo $*"
    sudo "$@"
  else
    say "this needs administrator rights and there is no sudo. Ask an administrator to run:"
    say "    $*"
    return 1
  fi
}

need_go() {
  if ! command -v go >/dev/null 2>&1; then
    say "pkvigil is built with Go 1.26 or newer, and there is no 'go' on the PATH."
    say "Install Go as described on the Go project's download page, or with your system's packages, and run this again."
    exit 1
  fi
}

need_postgres() {
  find_postgres && return 0
  if ! command -v apt-get >/dev/null 2>&1; then
    say "pkvigil needs the PostgreSQL server programs (initdb, postgres), version 15 or newer, and finds none."
    say "This system has no apt-get. Install the package that holds them with your own tools, for example:"
    say "    dnf install postgresql-server      (Fedora, RHEL and relatives)"
    say "    zypper install postgresql-server   (SUSE)"
    say "    pacman -S postgresql               (Arch)"
    say "    brew install postgresql@15         (macOS)"
    say "or put their folder on the PATH, and run this again. No server needs to be running: pkvigil starts a private one."
    exit 1
  fi
  say "installing the PostgreSQL server programs (package postgresql) ..."
  as_root env DEBIAN_FRONTEND=noninteractive apt-get update -q >/dev/null || say "apt-get update did not work; trying with the package lists at hand"
  as_root env DEBIAN_FRONTEND=noninteractive apt-get install -y -q --no-install-recommends postgresql >/dev/null || {
    say "apt-get could not install postgresql. Look at its message above; with no network, install the package from a local copy."
    exit 1
  }
  find_postgres || { say "postgresql is installed, but initdb and postgres are in no place this script knows (/usr/lib/postgresql/*/bin)."; exit 1; }
}
