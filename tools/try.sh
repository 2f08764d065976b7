#!/bin/sh
# Installs rtid into .venv beside this folder and shows the demo: sh tools/try.sh [options of rtid demo]
set -eu
project=$(cd "$(dirname "$0")/.." && pwd)
. "$project/tools/venv.sh"
install
exec "$venv/bin/rtid" demo "$@"
