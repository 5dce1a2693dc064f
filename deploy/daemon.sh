# SPDX-License-Identifier: GPL-3.0-or-later
# shellcheck shell=bash
# The daemon as deploy/up and deploy/down see it, sourced: a process of its own session, with its
# pid, port and log beside the catalog. No service manager is needed.

# daemon_pid DATA: the process that serves this catalog; fails if there is none. A pid file left by
# a crash may name a process of somebody else, so the command line is compared too.
daemon_pid() {
  local pid
  pid=$(cat "$1/leewayd.pid" 2>/dev/null) || return 1
  [[ $pid =~ ^[0-9]+$ ]] || return 1
  tr '\0' '\n' <"/proc/$pid/cmdline" 2>/dev/null | grep -qxF -- "$1" || return 1
  # A zombie has ended, only nobody has looked yet.
  [ "$(sed -n 's/^State:[[:space:]]*\(.\).*/\1/p' "/proc/$pid/status" 2>/dev/null)" != Z ] || return 1
  printf '%s\n' "$pid"
}

# daemon_port DATA: the port it was started on.
daemon_port() {
  cat "$1/leewayd.port" 2>/dev/null || printf 'unknown\n'
}

# daemon_start PROGRAM DATA PORT
daemon_start() {
  printf '%s\n' "$3" >"$2/leewayd.port"
  setsid "$1" --data "$2" --port "$3" </dev/null >>"$2/leewayd.log" 2>&1 &
  printf '%s\n' "$!" >"$2/leewayd.pid"
  disown
  sleep 0.2
}

# last_words DATA: the end of its log, as a hint.
last_words() {
  printf 'The end of %s/leewayd.log:\n' "$1"
  tail -n 8 "$1/leewayd.log" 2>/dev/null | sed 's/^/    /'
}

# down_command DATA: how to stop it.
down_command() {
  if [ "$1" = "${root:-}/build/run" ]; then
    printf 'deploy/down\n'
  else
    printf 'deploy/down --data %q\n' "$1"
  fi
}
