# Sourced by the scripts beside it: makes a virtual environment of its own and installs into it.
# usage: . environment.sh; prepare FOLDER REQUIREMENT...

prepare() {
  environment=$1
  shift
  python=$(command -v python3 || true)
  if [ -z "$python" ] || ! "$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))'; then
    echo "stagesum needs python3, version 3.11 or newer; found: ${python:-none} $("${python:-true}" --version 2>&1)" >&2
    exit 2
  fi
  if [ ! -x "$environment/bin/python" ] && ! "$python" -m venv "$environment"; then
    echo "python3 can't make a virtual environment; install its venv and pip (Debian: python3-venv)" >&2
    exit 2
  fi
  log=$environment/install.log
  if ! "$environment/bin/python" -m pip install --quiet --disable-pip-version-check "$@" >"$log" 2>&1; then
    cat "$log" >&2
    echo "the installation failed; what pip said stands above" >&2
    exit 2
  fi
}
