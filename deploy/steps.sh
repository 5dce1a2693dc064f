# SPDX-License-Identifier: GPL-3.0-or-later
# shellcheck shell=bash
# What deploy/up, deploy/down and tests/run share, sourced: numbered steps that say how long they
# took, failures that say what to do next, and Debian packages of which only the missing ones are
# installed. The caller sets `steps` to the number of its steps and `log` to a file for the output
# of quiet commands.

root=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
step_no=0
step_name=""
step_began=$SECONDS
log=${log:-/dev/null}
packages_file=$root/deploy/packages.txt

# step SENTENCE: begins a step.
step() {
  step_no=$((step_no + 1))
  step_name=$1
  step_began=$SECONDS
  printf '[%d/%d] %s\n' "$step_no" "${steps:-$step_no}" "$step_name"
}

# said SENTENCE: one more line of the running step.
said() {
  printf '      %s\n' "$1"
}

# took: ends a step that may have lasted.
took() {
  local seconds=$((SECONDS - step_began))
  if [ "$seconds" -ge 2 ]; then said "done in $seconds s"; fi
}

# give_up WHAT HINT...: says which step failed and what to do, then ends the script.
give_up() {
  printf '\nFAILED in step %d, %s: %s\n' "$step_no" "$step_name" "$1" >&2
  shift
  local hint
  for hint in "$@"; do printf '  %s\n' "$hint" >&2; done
  exit 1
}

# quietly COMMAND...: runs it with its output in the log; shows the end of that output if it fails.
quietly() {
  local from=1 status=0
  if [ -f "$log" ]; then from=$(($(wc -l <"$log") + 1)); fi
  printf '$ %s\n' "$*" >>"$log"
  "$@" >>"$log" 2>&1 </dev/null || status=$?
  if [ "$status" -ne 0 ] && [ "$log" != /dev/null ]; then
    printf '\n--- the end of what "%s" printed:\n' "$*" >&2
    tail -n +"$from" "$log" | tail -n 25 >&2
  fi
  return "$status"
}

# Is the package there, or the program that is as good?
have_package() {
  { [ -n "${2:-}" ] && command -v "$2" >/dev/null; } ||
    [ "$(dpkg-query -W -f '${db:Status-Status}' "$1" 2>/dev/null)" = installed ]
}

# packages_missing KIND...: the packages of these kinds that are not there, one a line.
packages_missing() {
  local kind package program
  while read -r kind package program; do
    case " $* " in
      *" $kind "*) have_package "$package" "$program" || printf '%s\n' "$package" ;;
    esac
  done < <(grep -vE '^(#|$)' "$packages_file")
}

packages_updated=no
# Reads the package lists afresh, once.
packages_update() {
  [ "$packages_updated" = no ] || return 0
  packages_updated=yes
  quietly apt-get -o DPkg::Lock::Timeout=300 update -qq ||
    give_up "the package lists could not be read" \
      "Check that this machine reaches its Debian mirror, then run this again."
}

# packages_install KIND...: installs what is missing of these kinds.
packages_install() {
  local missing
  mapfile -t missing < <(packages_missing "$@")
  if [ "${#missing[@]}" -eq 0 ]; then
    said "nothing is missing"
    return 0
  fi
  said "installing: ${missing[*]}"
  if [ "$(id -u)" -ne 0 ] || ! command -v apt-get >/dev/null; then
    give_up "packages are missing and cannot be installed from here" \
      "Run as root on Debian 12: apt-get install ${missing[*]}"
  fi
  packages_update
  DEBIAN_FRONTEND=noninteractive quietly apt-get -o DPkg::Lock::Timeout=300 install -qq -y \
    --no-install-recommends "${missing[@]}" ||
    give_up "the packages could not be installed" \
      "Try it by hand: apt-get install ${missing[*]}"
}

# packages_unpack DIR: puts the program of each `unpack` package into DIR, unless it is on the PATH.
packages_unpack() {
  local kind package program scratch
  while read -r kind package program; do
    [ "$kind" = unpack ] || continue
    if command -v "$program" >/dev/null || [ -x "$1/$program" ]; then continue; fi
    said "unpacking $program from $package"
    packages_update
    scratch=$(mktemp -d)
    chmod 755 "$scratch"
    (cd "$scratch" && quietly apt-get -o APT::Sandbox::User=root download -qq "$package" &&
      dpkg-deb -x "$package"_*.deb files) ||
      give_up "$package could not be unpacked" "Try it by hand: apt-get download $package"
    mkdir -p "$1"
    find "$scratch/files" -type f -name "$program" -perm -u+x -exec cp {} "$1/" \;
    rm -rf "$scratch"
    [ -x "$1/$program" ] || give_up "$package holds no program $program" "Look at $packages_file."
  done < <(grep -vE '^(#|$)' "$packages_file")
}

# configure DIR OPTION...: cmake for the checkout in DIR, with ninja and, where present, ccache.
configure() {
  local dir=$1
  shift
  local launcher=()
  if command -v ccache >/dev/null; then
    launcher=(-DCMAKE_C_COMPILER_LAUNCHER=ccache -DCMAKE_CXX_COMPILER_LAUNCHER=ccache)
  fi
  quietly cmake -S "$root" -B "$dir" -G Ninja "${launcher[@]}" "$@"
}
