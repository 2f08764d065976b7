#!/bin/sh
# The checks that need no run: style, types, and which room may import which.
set -eu
project=$(cd "$(dirname "$0")/.." && pwd)
. "$project/tools/venv.sh"
install test
cd "$project"
"$venv/bin/ruff" check --quiet .
"$venv/bin/mypy"
"$venv/bin/lint-imports" --no-cache
