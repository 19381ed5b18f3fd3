# Sourced by the other scripts: finds Python >= 3.10 and makes a virtual environment.

die() { printf '%s\n' "$*" >&2; exit 1; }

as_root() { [ "$(id -u)" = 0 ] && command -v apt-get >/dev/null; }

# debian_packages NAME...: install what is missing, where that is possible
debian_packages() {
  as_root || return 1
  { apt-get update -qq && DEBIAN_FRONTEND=noninteractive apt-get install -y -qq --no-install-recommends "$@"; } >/dev/null
}

find_python() {
  local name
  for name in "${PYTHON:-python3}" python3.14 python3.13 python3.12 python3.11 python3.10; do
    if command -v "$name" >/dev/null && "$name" -c 'import sys; sys.exit(sys.version_info < (3, 10))'; then
      printf '%s' "$name"
      return
    fi
  done
  die "Python 3.10 or newer is needed; set PYTHON to one."
}

# make_environment DIR EXTRA: virtual environment with topovet[EXTRA] installed from this checkout
make_environment() {
  local folder=$1 extra=$2 python
  python=$(find_python) || exit 1
  if [ ! -x "$folder/bin/python" ]; then
    "$python" -m venv "$folder" 2>/dev/null || {
      rm -rf "$folder"
      debian_packages python3-venv || die "'$python -m venv' does not work; install python3-venv."
      "$python" -m venv "$folder"
    }
  fi
  "$folder/bin/python" -m pip install --quiet --disable-pip-version-check -e ".$extra" ||
    die "installing topovet failed; the lines above say why."
}
