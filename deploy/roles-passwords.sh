#!/bin/sh
# Sets the passwords of roles.sql from secret files; run by the database's
# container when it is made. A password never stands on a command line.
set -eu
{
  printf "ALTER ROLE pkvigil_owner PASSWORD '%s';\n" "$(cat /run/secrets/owner)"
  printf "ALTER ROLE pkvigil_service PASSWORD '%s';\n" "$(cat /run/secrets/service)"
} | psql -v ON_ERROR_STOP=1 --quiet --username "${POSTGRES_USER:-postgres}" --dbname "${POSTGRES_DB:-pkvigil}"
