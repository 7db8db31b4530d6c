# Sourced by the project's scripts: finds a Python that is new enough and keeps the project's .venv up to date.
#
#   prepare_python EXTRA    sets PYTHON to the interpreter of .venv, in which the project is installed with
#                           that extra of pyproject.toml ("local" or "test").
#
# With SPARKRANK_PYTHON set, that interpreter is used as it is and nothing is installed.

refuse() {
    echo "sparkrank: $1" >&2
    exit "${2:-1}"
}

# The first Python of PATH that is new enough.
find_python() {
    local name found=""
    for name in python3 python3.14 python3.13 python3.12 python3.11 python; do
        command -v "$name" >/dev/null 2>&1 || continue
        if "$name" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
            command -v "$name"
            return
        fi
        found="${found:+$found, }$("$name" --version 2>&1 | head -n 1)"
    done
    refuse "Python: expected version 3.11 or later in PATH; found ${found:-none}; install it, or set SPARKRANK_PYTHON to one that has the project's packages"
}

# Java is checked by the program itself, before minutes are spent on packages.
check_java() {
    PYTHONPATH="$ROOT" "$1" -c '
import sys
from sparkrank.errors import SparkrankError
from sparkrank.session import check_java
try:
    check_java()
except SparkrankError as error:
    sys.exit(f"sparkrank: {error}")
'
}

prepare_python() {
    local extra="$1" base wanted stamp
    if [ -n "${SPARKRANK_PYTHON:-}" ]; then
        PYTHON="$(command -v "$SPARKRANK_PYTHON")" ||
            refuse "SPARKRANK_PYTHON: expected a Python; found $SPARKRANK_PYTHON, which is none; correct or unset it"
        # Scripts change the working folder.
        case "$PYTHON" in /*) ;; *) PYTHON="$PWD/$PYTHON" ;; esac
        check_java "$PYTHON"
        return
    fi
    # The extra "test" holds all of "local", so its stamp stands for both.
    wanted="$(cksum <"$ROOT/pyproject.toml")"
    PYTHON="$ROOT/.venv/bin/python"
    stamp="$ROOT/.venv/installed"
    if "$PYTHON" -c '' 2>/dev/null; then
        for extra in "$1" test; do
            if [ "$(cat "$stamp-$extra" 2>/dev/null)" = "$wanted" ]; then
                check_java "$PYTHON"
                return
            fi
        done
    fi
    extra="$1"
    base="$(find_python)" || exit 1
    check_java "$base"
    if ! "$PYTHON" -c '' 2>/dev/null; then
        echo "making .venv with $base"
        "$base" -m venv --clear "$ROOT/.venv" >/dev/null ||
            refuse "Python: expected $base to make a virtual environment; found that it cannot; install its venv package (python3-venv on Debian and Ubuntu)"
    fi
    echo "installing the packages of pyproject.toml into .venv (extra: $extra); some minutes the first time"
    rm -f "$stamp"-*
    "$PYTHON" -m pip install --quiet --disable-pip-version-check --editable "$ROOT[$extra]" ||
        refuse "packages: expected pip to install those of pyproject.toml; found the error above; check the network or pip's configuration and run again"
    echo "$wanted" >"$stamp-$extra"
}
