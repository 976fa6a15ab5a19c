#!/usr/bin/env bash
# Restores a backup into an empty database and says what is in it. Stop the
# service first. The connection is that of libpq, as in backup.sh, by the role
# that is to own the schemas (pkvigil_owner on a server of your own, after
# deploy/roles.sql; pkvigil on a private server). Afterwards:
#
#   pkvigil deeds          must say that the chain is intact
#   pkvigil again --all    must say that no digits differ
set -euo pipefail
[ $# -eq 1 ] || { echo "usage: deploy/restore.sh FILE.dump" >&2; exit 2; }
export PGUSER="${PGUSER:-pkvigil}" PGDATABASE="${PGDATABASE:-pkvigil}"
PATH="$PATH:$(ls -d /usr/lib/postgresql/*/bin 2>/dev/null | sort -V | tail -n 1)"
if [ -f "$1.sha256" ]; then (cd "$(dirname "$1")" && sha256sum --quiet --check "$(basename "$1").sha256"); fi
there=$(psql -XAtc "select count(*) from information_schema.schemata where schema_name in ('pkvigil', 'readout')")
[ "$there" = 0 ] || { echo "database $PGDATABASE already holds schema pkvigil; restore into an empty one: createdb NAME, PGDATABASE=NAME" >&2; exit 1; }
psql -XAtqc "select 1 from pg_roles where rolname = 'pkvigil_reader'" | grep -q 1 || psql -Xqc "create role pkvigil_reader nologin"
pg_restore --no-owner --exit-on-error --single-transaction --dbname="$PGDATABASE" "$1"
psql -XAt -F ' ' -c "select 'schema', max(version) from pkvigil.schema_version" -c "select 'results', count(*) from pkvigil.result" -c "select 'files', count(*) from pkvigil.file" -c "select 'deeds', count(*) from pkvigil.deed"
