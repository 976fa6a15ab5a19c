#!/usr/bin/env bash
# Sets up what is missing and runs every test. Arguments go to `go test`.
set -euo pipefail
cd "$(dirname "$0")/.."
. deploy/setup.sh
need_go
need_postgres
go test -count=1 -timeout 9m "$@" ./...
