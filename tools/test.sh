#!/bin/sh
# All checks, then the tests: sh tools/test.sh [options of pytest]
set -eu
project=$(cd "$(dirname "$0")/.." && pwd)
. "$project/tools/venv.sh"
install test
cd "$project"
sh tools/check.sh
exec "$venv/bin/python" -m pytest "$@"
