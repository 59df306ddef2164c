# Sets up .venv with pinned versions, and the Debian packages where that is possible; sourced by tests/run and demo_lots/run.
# Usage: source .ci/setup.sh EXTRA PACKAGE...   (EXTRA: an optional-dependency group of pyproject.toml, or "")

say() { printf '%s\n' "$*" >&2; }

need_debian_packages() {
  local missing=() package
  for package in "$@"; do
    dpkg-query -W -f '${Status}' "$package" 2>/dev/null | grep -q 'ok installed' || missing+=("$package")
  done
  [ ${#missing[@]} -eq 0 ] && return 0
  if command -v apt-get >/dev/null && [ "$(id -u)" = 0 ]; then
    say "Installing Debian packages: ${missing[*]}"
    { apt-get update -qq && DEBIAN_FRONTEND=noninteractive apt-get install -y -qq --no-install-recommends "${missing[@]}"; } >/dev/null && return 0
  fi
  say "Missing: ${missing[*]}"
  say "These are Debian 12 package names. Install them (as root: apt-get install ${missing[*]}), or their like elsewhere, and run this again."
  return 1
}

find_python() {
  local candidate
  for candidate in python3.11 python3.12 python3.13 python3; do
    command -v "$candidate" >/dev/null || continue
    "$candidate" -c 'import sys, venv, ensurepip; sys.exit(sys.version_info < (3, 11))' 2>/dev/null && { echo "$candidate"; return 0; }
  done
  say "Missing: Python 3.11 or newer with its venv module (Debian 12: apt-get install python3 python3-venv)."
  return 1
}

setup_venv() {
  local extra=$1 python stamp
  stamp=$(cat pyproject.toml .ci/constraints.txt | sha256sum | cut -c1-16)-$extra
  [ -x .venv/bin/python ] && [ -e ".venv/ready-$stamp" ] && return 0
  if ! python=$(find_python 2>/dev/null); then
    need_debian_packages python3 python3-venv || return 1
    python=$(find_python) || return 1
  fi
  say "Setting up .venv (pinned versions, once)"
  [ -x .venv/bin/python ] || "$python" -m venv .venv
  .venv/bin/python -m pip install --quiet --disable-pip-version-check --constraint .ci/constraints.txt --editable ".${extra:+[$extra]}"
  touch ".venv/ready-$stamp"
}
