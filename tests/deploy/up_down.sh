#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# deploy/up and deploy/down as a user meets them: up, up again, a second service beside it, down,
# up with the kept catalog, down twice. Needs the Release build; leaves nothing behind.
#   tests/deploy/up_down.sh BUILD      BUILD holds release/
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/../.."
export LEEWAY_BUILD=$1
scratch=$(mktemp -d)
data="$scratch/with a blank/run"
names=(tilt-table belt-hopper lid-turner label-stage case-packer)
bad=0
finish() {
  deploy/down --data "$data" >/dev/null 2>&1 || true
  rm -rf "$scratch"
}
trap finish EXIT

free_port() {
  python3 -c 'import socket; s = socket.socket(); s.bind(("127.0.0.1", 0)); print(s.getsockname()[1])'
}

# expect SENTENCE COMMAND...: the command holds.
expect() {
  local sentence=$1
  shift
  if "$@" >/dev/null 2>&1; then
    printf 'ok    %s\n' "$sentence"
  else
    printf 'WRONG %s\n      (%s)\n' "$sentence" "$*"
    bad=$((bad + 1))
  fi
}

# run NAME STATUS COMMAND...: runs it with its output in $scratch/NAME; its status must be STATUS.
run() {
  local name=$1 wanted=$2 status=0
  shift 2
  "$@" >"$scratch/$name" 2>&1 </dev/null || status=$?
  if [ "$status" -ne "$wanted" ]; then
    printf 'WRONG %s ended with %d, not %d:\n' "$*" "$status" "$wanted"
    sed 's/^/      | /' "$scratch/$name"
    bad=$((bad + 1))
  fi
}

says() { grep -qE -- "$2" "$scratch/$1"; }
# An ended process may stay in the table until its parent looks, in a container for ever.
ended() { [ ! -e "/proc/$1" ] || grep -q '^State:[[:space:]]*Z' "/proc/$1/status"; }
stays_silent() { ! grep -qE -- "$2" "$scratch/$1"; }
revisions() {
  local name
  for name in "${names[@]}"; do curl -fsS -m 5 "http://127.0.0.1:$port/v1/mechanisms/$name/revisions"; done
}

port=$(free_port)
run first 0 deploy/up --port "$port" --data "$data"
expect "the first run names its port" says first "http://127.0.0.1:$port"
for name in "${names[@]}"; do
  expect "it publishes $name" says first "$name: revision 1 published"
  expect "it asks $name" says first "^\\\$ leeway ask reach $name "
done
expect "it says what Leeway is not" says first "no safety function"
expect "the service is ready" curl -fsS -m 5 "http://127.0.0.1:$port/readyz"
before=$(revisions)
pid=$(cat "$data/leewayd.pid")

run second 0 deploy/up --port "$port" --data "$data"
expect "run twice it sees the daemon" says second "runs already \\(process $pid\\)"
expect "run twice it publishes nothing" stays_silent second "revision [0-9]+ published"
expect "run twice no revision is added" [ "$before" = "$(revisions)" ]

other=$(free_port)
run elsewhere 1 deploy/up --port "$other" --data "$data"
expect "another port for the same catalog is refused" says elsewhere "already serves this catalog"
run taken 1 deploy/up --port "$port" --data "$scratch/other"
expect "a port that is taken is refused, with what to do" says taken "Choose a free one"
run letters 2 deploy/up --port http
expect "a port that is no number is refused" says letters "number from 1 to 65535"
run unknown 2 deploy/down --now
expect "an unknown option is refused" says unknown "no option --now"

run down 0 deploy/down --data "$data"
expect "it says that it stopped" says down "^stopped"
expect "the process has ended" ended "$pid"
run down_again 0 deploy/down --data "$data"
expect "stopping twice is harmless" says down_again "does not run"

run third 0 deploy/up --port "$port" --data "$data" --prefix "$scratch/prefix"
expect "the catalog was kept" stays_silent third "revision [0-9]+ published"
expect "the same revisions answer" [ "$before" = "$(revisions)" ]
expect "the daemon runs from the prefix" [ "$(readlink "/proc/$(cat "$data/leewayd.pid")/exe")" \
  = "$scratch/prefix/bin/leewayd" ]
expect "the client is installed" "$scratch/prefix/bin/leeway" help

# A daemon that was killed leaves a pid file behind; the next run must not believe it.
kill -KILL "$(cat "$data/leewayd.pid")"
run after_kill 0 deploy/up --port "$port" --data "$data"
expect "after a kill it starts again" says after_kill "started \\(process"
expect "and has the same revisions" [ "$before" = "$(revisions)" ]

run last 0 deploy/down --data "$data"
printf '%d wrong\n' "$bad"
[ "$bad" -eq 0 ]
