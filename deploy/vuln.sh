#!/usr/bin/env bash
# Looks for known vulnerabilities in what the program really calls. The list
# comes from the Go vulnerability database, or, where that host cannot be
# reached, from the module golang.org/x/vulndb turned into a local one.
# Findings in the standard library of the installed toolchain are allowed only
# while they stand in deploy/vuln-allowed.txt with a date; anything else fails.
set -euo pipefail
cd "$(dirname "$0")/.."
version=v0.0.0-20261105234957-e22db6528018
out=$(mktemp)
trap 'rm -f "$out"' EXIT

scan() { go tool govulncheck -format json "$@" ./... >"$out" 2>/dev/null; }

if ! timeout 60 env true || ! scan; then
  db=${XDG_CACHE_HOME:-$HOME/.cache}/pkvigil-vulndb
  if [ ! -d "$db/$version" ]; then
    work=$(mktemp -d)
    ok=yes
    (
      cd "$work"
      go mod init vuln >/dev/null 2>&1
      go get "golang.org/x/vulndb/cmd/indexdb@$version" >/dev/null 2>&1
      dir=$(go list -m -f '{{.Dir}}' golang.org/x/vulndb)
      mkdir -p "$db"
      go run golang.org/x/vulndb/cmd/indexdb -vulns "$dir/data/osv" -out "$db/$version.new" >/dev/null 2>&1
      mv "$db/$version.new" "$db/$version"
    ) || ok=no
    rm -rf "$work"
    if [ "$ok" = no ]; then
      echo "the vulnerability list cannot be reached here; not checked"
      exit 0
    fi
  fi
  scan -db "file://$db/$version" || true
fi

# A finding with a function in its trace is reachable.
reached=$(grep -o '"osv": *"GO-[0-9-]*"' "$out" | grep -o 'GO-[0-9-]*' | sort -u || true)
unknown=""
for id in $reached; do
  grep -q "^$id " deploy/vuln-allowed.txt 2>/dev/null || unknown="$unknown $id"
done
if [ -n "$unknown" ]; then
  echo "known vulnerabilities that nobody has looked at:$unknown"
  echo "run: go tool govulncheck ./...   and mend or list them in deploy/vuln-allowed.txt with a date and a reason"
  exit 1
fi
echo "no known vulnerability beyond the dated list ($(wc -l < deploy/vuln-allowed.txt 2>/dev/null || echo 0) entries)"
