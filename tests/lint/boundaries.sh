#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Which room may include what. System headers are reachable by everyone, so only this check keeps
# HTTP, JSON, SQL and the numerics library each in one room, and the arrows pointing one way.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

# All that core may use of the C library: no clock, no threads, no files beyond what stdio.h
# brings (tests/lint/banned.sh forbids those calls).
core_system='assert|complex|ctype|errno|float|inttypes|limits|math|stdalign|stdarg|stdatomic'
core_system+='|stdbool|stddef|stdint|stdio|stdlib|stdnoreturn|string'

# Is the file in one of the folders?
in_any() {
  local file=$1 folder
  shift
  for folder in "$@"; do
    case $file in "$folder"/*) return 0 ;; esac
  done
  return 1
}

# only HEADER-PATTERN TEXT FOLDER...: the header is included in these folders alone.
only() {
  local pattern=$1 what=$2
  shift 2
  if [[ $header =~ $pattern ]] && ! in_any "$file" "$@"; then
    fault "$file:$line" "includes $what; only $* may"
  fi
}

# never FOLDER HEADER-PATTERN WHY
never() {
  if in_any "$file" "$1" && [[ $header =~ $2 ]]; then
    fault "$file:$line" "includes $header; $1 $3"
  fi
}

# Does a quoted include find its header inside the folder? Without a process for each, since there
# are a thousand.
resolves_in() {
  local base=$1 path=${file%/*}/$header
  [ ! -e "$base/$header" ] || [[ $header == *..* ]] || return 0
  [ -e "$path" ] || return 1
  while [[ $path =~ ^(.*/)?[^/.]+[^/]*/\.\./(.*)$ ]]; do
    path=${BASH_REMATCH[1]}${BASH_REMATCH[2]}
  done
  [[ $path == "$base"/* ]]
}

seen=0
while IFS=: read -r file line text; do
  [[ $text =~ ^[[:space:]]*\#[[:space:]]*include[[:space:]]*([\<\"])([^\>\"]+)[\>\"] ]] || continue
  kind=${BASH_REMATCH[1]}
  header=${BASH_REMATCH[2]}
  seen=$((seen + 1))

  only '(^|/)microhttpd\.h$' "the HTTP library" server/http
  only '(^|/)cJSON\.h$' "the JSON library" server/codec clients tests
  only '(^|/)sqlite3\.h$' "the database" server/catalog tests
  only '^gsl/' "the numerics library" core/math tests
  only '^curl/' "the HTTP client library" clients tests

  # The digest of a token is no JSON.
  [[ $header == ../codec/sha256.h ]] ||
    never server/http '^(leeway/|(\.\./)?(codec|catalog)/)' "knows requests and replies only"
  never server/catalog '^(leeway/|(\.\./)?(codec|http|api)/)' "stores text and digests only"
  never server/codec '^(\.\./)?(http|catalog|api)/' "is called by api and calls core only"
  # Help pages name the problems that http reports; that list has no code.
  [[ $header == ../http/problems.h ]] ||
    never server/api '^(\.\./)?http/' "hands replies up and never calls http"

  if in_any "$file" core; then
    if [ "$kind" = '"' ]; then
      resolves_in core || fault "$file:$line" "includes $header, which is not in core"
    elif ! [[ $header =~ ^(leeway|gsl)/ || $header =~ ^($core_system)\.h$ ]]; then
      fault "$file:$line" "includes <$header>; core uses the C library without clock and system"
    fi
  fi
  if in_any "$file" core/include; then
    [[ $kind = '<' || $header =~ ^(leeway/)?[a-z_]+\.h$ ]] ||
      fault "$file:$line" "includes $header; public headers include public headers only"
  fi
  if in_any "$file" clients; then
    [[ ! $header =~ ^leeway/ ]] || fault "$file:$line" "includes $header; clients speak HTTP only"
    client=${file#clients/}
    [ "$kind" = '<' ] || resolves_in "clients/${client%%/*}" ||
      fault "$file:$line" "includes $header, which is not that client's own"
  fi
done < <(files "$c_files" core server clients tests | xargs -r grep -nE '^\s*#\s*include' /dev/null)

finish "boundaries ($seen includes)"
