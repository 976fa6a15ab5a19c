#!/usr/bin/env bash
# Sets up what is missing, builds pkvigil and replays 60 nights of an invented
# laboratory through the real service. Arguments go to `pkvigil demo`.
set -euo pipefail
cd "$(dirname "$0")/.."
. deploy/setup.sh
need_go
need_postgres
say "building pkvigil ..."
go build -trimpath -o bin/pkvigil ./cmd/pkvigil
exec bin/pkvigil demo "$@"
