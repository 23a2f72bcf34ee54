#!/bin/sh
# Shows an error budget of the example chain. Needs Python 3.11 or later with venv and pip, nothing else.
# Makes its own virtual environment in .venv-demo; runs from any folder, and again.
set -eu
root=$(CDPATH='' cd -- "$(dirname -- "$0")/.." && pwd)
environment="$root/.venv-demo"
python=${PYTHON:-python3}

fail() {
    echo "demo: $*" >&2
    exit 1
}

command -v "$python" >/dev/null 2>&1 || fail "found no $python; install Python 3.11 or later"
"$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))' ||
    fail "found $("$python" --version 2>&1); Python 3.11 or later is needed"
"$python" -c 'import venv, ensurepip' 2>/dev/null ||
    fail "this Python has no venv and pip; a Debian or Ubuntu system has them in the package python3-venv"

"$environment/bin/python" -m pip --version >/dev/null 2>&1 ||
    "$python" -m venv --clear "$environment" || fail "can't make a virtual environment in $environment"

echo "Installing stagesum into $environment ..."
"$environment/bin/python" -m pip install -qq --disable-pip-version-check "$root[server]" ||
    fail "pip could not install stagesum; its message stands above (is a package index reachable?)"

echo
unset STAGESUM_URL
status=0
"$environment/bin/stagesum" budget "$root/client/stagesum/examples/irrigation_transmitter.json" || status=$?

echo
case $status in
0) echo "Exit status 0: the limit is met." ;;
1) echo "Exit status 1: the limit is not met, or that is undecided. A pipeline would stop here." ;;
2) echo "Exit status 2: the request is wrong." ;;
*) echo "Exit status $status: the service can't be reached or is broken." ;;
esac
echo "(0 met or no limit given, 1 not met or undecided, 2 wrong request, 3 no service)"
[ "$status" -le 1 ]
