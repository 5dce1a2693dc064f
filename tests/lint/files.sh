# SPDX-License-Identifier: GPL-3.0-or-later
# shellcheck shell=bash
# Shared by the lint checks, sourced. A check is called with the checkout's root (default: two
# folders up), prints every fault as file:line: sentence, and ends with `finish`.

cd "${1:-$(dirname "${BASH_SOURCE[0]}")/../..}" || exit 2
faults=0

# One fault: place, then what is wrong and what to do.
fault() {
  printf '%s: %s\n' "$1" "$2"
  faults=$((faults + 1))
}

# Exit status of the check; says in a line what was looked at.
finish() {
  printf '%s: %d fault(s)\n' "$1" "$faults"
  [ "$faults" -eq 0 ] || exit 1
  exit 0
}

# Files of ours under the given folders that match a regular expression, sorted. What is built or
# fetched is left out.
files() {
  local pattern=$1 folder
  shift
  for folder in "$@"; do
    [ -e "$folder" ] || continue
    find "$folder" \( -name build -o -name node_modules -o -name __pycache__ -o -name .git \) -prune \
      -o -type f -print
  done | sed 's|^\./||' | grep -E "$pattern" | LC_ALL=C sort || true
}

# shellcheck disable=SC2034 # used by the checks
rooms=(core server clients deploy tests)
export c_files='\.(c|h|inc|cpp)$'
export source_files='(\.(c|h|inc|cpp|py|sh|js|mjs|sql)|^tests/run|^deploy/up|^deploy/down)$'
