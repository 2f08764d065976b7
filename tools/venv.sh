# Sourced by the scripts beside it, which set `project` first: finds Python, makes .venv in the project once and
# installs the project there. What fails ends as one line that names the mend, with exit code 69.

venv=$project/.venv

fail() {
    printf 'rtid: %s\n' "$1" >&2
    exit 69
}

# Sets `python` to the first Python that is new enough.
find_python() {
    for python in python3 python3.14 python3.13 python3.12 python3.11; do
        if "$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))' >/dev/null 2>&1; then
            return
        fi
    done
    found=$(python3 -c 'import sys; print("python3 here is %d.%d" % sys.version_info[:2])' 2>/dev/null) ||
        found='there is no python3 here'
    fail "needs Python 3.11 or newer, but $found: apt install python3.11 python3.11-venv (or your system's newer one)"
}

# An environment is of use only while its own Python runs (a system upgrade breaks the link).
make_venv() {
    if "$venv/bin/python" -c 'import pip' >/dev/null 2>&1; then
        return
    fi
    find_python
    "$python" -c 'import venv, ensurepip' >/dev/null 2>&1 ||
        fail "$python cannot make virtual environments: apt install python3-venv"
    said=$("$python" -m venv --clear "$venv" 2>&1) ||
        fail "cannot make $venv: $(last_line "$said"); mend that, or move the project to a folder you may write to"
}

last_line() {
    printf '%s\n' "$1" | sed -n '/./h; ${x;p;}'
}

# install NAME: the project itself, with the extra NAME where one is given. Done again only when the project's
# requirements or its folder changed.
install() {
    stamp=$venv/installed${1:+-$1}
    wanted="$project $(cksum <"$project/pyproject.toml")"
    make_venv
    if [ "$(cat "$stamp" 2>/dev/null)" = "$wanted" ]; then
        return
    fi
    printf 'rtid: installing into %s (once, about a minute) ...\n' "$venv" >&2
    said=$("$venv/bin/python" -m pip install --quiet --disable-pip-version-check -e "$project${1:+[$1]}" 2>&1) ||
        fail "$(why_not_installed "$said")"
    printf '%s\n' "$wanted" >"$stamp"
}

why_not_installed() {
    case $1 in
        *NewConnectionError* | *'Could not find a version'* | *imeout*)
            echo "pip cannot reach a package index: connect this computer to the network, or set PIP_INDEX_URL" \
                "to a local one, and start again" ;;
        *'No space left'*)
            echo "no space left on the disk of $venv: make room (about 200 MB) and start again" ;;
        *)
            echo "pip failed ($(printf '%s\n' "$1" | sed -n '/E[Rr][Rr][Oo][Rr]:/{s/^ *//;h;}; ${x;p;}')); to see all:" \
                "$venv/bin/python -m pip install -e $project" ;;
    esac
}
