#!/usr/bin/env bash
# Looks for known vulnerabilities in what the program really calls. The list
# comes from the Go vulnerability database, or, where that host cannot be
# reached, from the module golang.org/x/vulndb.
# Findings stand in deploy/vuln-allowed.txt with a date and a reason while
# nothing can be done about them; anything else fails. Where neither list can
# be had, it says so and passes: no network is no vulnerability.
set -euo pipefail
cd "$(dirname "$0")/.."
version=v0.0.0-20261105234957-e22db6528018
limit=${PKVIGIL_VULN_SECONDS:-340} # of all together
began=$SECONDS
out=$(mktemp)
work=$(mktemp -d)
trap 'rm -rf "$out" "$work"' EXIT
left() { local n=$((limit - (SECONDS - began))); [ "$n" -gt 1 ] && echo "$n" || echo 1; }
say() { printf '%s\n' "$*"; }

tool=$work/govulncheck
if ! timeout "$(left)" go build -o "$tool" golang.org/x/vuln/cmd/govulncheck 2>"$out"; then
  say "govulncheck cannot be built here ($(tail -n 1 "$out")); not checked"
  exit 0
fi

# scan WITHIN [FLAGS]: the findings as JSON in $out. Its own exit code says
# nothing in this format; a run that worked ends with the configuration and all
# progress lines in place.
scan() {
  local within=$1
  shift
  timeout "$within" "$tool" -format json "$@" ./... >"$out" 2>"$out.err" </dev/null && grep -q '"config"' "$out"
}

database_answers() {
  command -v curl >/dev/null 2>&1 && curl -fsS --max-time 10 -o /dev/null https://vuln.go.dev/index/db.json 2>/dev/null
}

# The module holds one file per vulnerability, which govulncheck reads as they are.
local_list() {
  (cd "$work" && timeout "$(left)" go mod download -json "golang.org/x/vulndb@$version") 2>"$out" |
    sed -n 's|^[[:space:]]*"Dir": "\(.*\)",$|\1/data/osv|p' | grep .
}

if database_answers && scan "$(left)"; then
  source="the Go vulnerability database"
elif list=$(local_list) && scan "$(left)" -db "file://$list"; then
  source="the module golang.org/x/vulndb $version"
else
  say "no list of vulnerabilities could be read in $((SECONDS - began)) s here; not checked"
  exit 0
fi

# A finding with a function in its trace is reached by a call. The first frame
# is where the fault lies; only the toolchain's own library may be on the list.
reached=$(awk '
  /^  "finding": \{/ { inside = 1; id = ""; module = ""; fn = 0 }
  inside && /^    "osv":/ { id = $2; gsub(/[",]/, "", id) }
  inside && /"module":/ && module == "" { module = $2; gsub(/[",]/, "", module) }
  inside && /"function":/ { fn = 1 }
  inside && /^  \}/ { if (fn) print id, module; inside = 0 }
' "$out" | sort -u)
unknown=""
while read -r id module; do
  [ -n "$id" ] || continue
  if [ "$module" != stdlib ] || ! grep -q "^$id " deploy/vuln-allowed.txt; then unknown="$unknown $id($module)"; fi
done <<<"$reached"
if [ -n "$unknown" ]; then
  say "known vulnerabilities that nobody has looked at:$unknown"
  say "run: go tool govulncheck ./...   and mend them, or list them in deploy/vuln-allowed.txt with a date and a reason"
  exit 1
fi
gone=""
for id in $(grep -o '^GO-[0-9-]*' deploy/vuln-allowed.txt); do
  grep -q "^$id " <<<"$reached" || gone="$gone $id"
done
[ -z "$gone" ] || say "no longer found and may leave deploy/vuln-allowed.txt:$gone"
say "no vulnerability beyond the dated list ($(grep -c '^GO-' deploy/vuln-allowed.txt) entries), by $source, in $((SECONDS - began)) s"
