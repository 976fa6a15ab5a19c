#!/usr/bin/env bash
# Writes a backup of pkvigil's database while the service runs, and proves that
# it can be read. The connection is that of libpq (PGHOST, PGUSER, PGDATABASE,
# PGPASSFILE ...), for a private server for example
#
#   sudo -u pkvigil env PGHOST=/var/lib/pkvigil/postgres/run deploy/backup.sh /backup
#
# The bytes of every file taken in are in it; settings file and secrets are not.
set -euo pipefail
[ $# -eq 1 ] || { echo "usage: deploy/backup.sh FOLDER" >&2; exit 2; }
[ -d "$1" ] || { echo "$1 is no folder" >&2; exit 2; }
export PGUSER="${PGUSER:-pkvigil}" PGDATABASE="${PGDATABASE:-pkvigil}"
PATH="$PATH:$(ls -d /usr/lib/postgresql/*/bin 2>/dev/null | sort -V | tail -n 1)"
umask 077
file="$1/pkvigil-$(date -u +%Y%m%dT%H%M%SZ).dump"
trap 'rm -f "$file.part"' EXIT
pg_dump --format=custom --no-owner --file="$file.part"
tables=$(pg_restore --list "$file.part" | grep -c ' TABLE DATA ')
[ "$tables" -gt 20 ] || { echo "the backup holds only $tables tables; something is wrong with it" >&2; exit 1; }
mv "$file.part" "$file"
(cd "$1" && sha256sum "$(basename "$file")" >"$(basename "$file").sha256")
echo "$file: $tables tables, $(du -h "$file" | cut -f1)"
