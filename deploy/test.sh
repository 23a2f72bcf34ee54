#!/bin/sh
# Runs all tests, then lint, format and types, in a virtual environment of its own (.venv-test).
# Words given to it go to pytest: sh deploy/test.sh -x tests/test_reading.py
set -eu
root=$(CDPATH='' cd -- "$(dirname -- "$0")/.." && pwd)
cd "$root"
environment="$root/.venv-test"
python=${PYTHON:-python3}

fail() {
    echo "test: $*" >&2
    exit 1
}

command -v "$python" >/dev/null 2>&1 || fail "found no $python; install Python 3.11 or later"
"$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))' ||
    fail "found $("$python" --version 2>&1); Python 3.11 or later is needed"

"$environment/bin/python" -m pip --version >/dev/null 2>&1 ||
    "$python" -m venv --clear "$environment" ||
    fail "can't make a virtual environment; a Debian or Ubuntu system needs the package python3-venv"

"$environment/bin/python" -m pip install -qq --disable-pip-version-check -e ".[dev]" ||
    fail "pip could not install what the tests need; its message stands above (is a package index reachable?)"

"$environment/bin/python" -m pytest -q -n auto "$@"
"$environment/bin/ruff" check
"$environment/bin/ruff" format --check
"$environment/bin/mypy"
