#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Calls that must not stand in the code: unbounded or unchecked ones everywhere, allocation where
# questions are answered, the outside world in core, and checks in tests that cannot do their job.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

everywhere='sprintf|vsprintf|strcpy|strcat|strncpy|strtok|atoi|atol|atoll|atof|gets|rand|srand|setenv|putenv'
allocation='malloc|calloc|realloc|aligned_alloc|posix_memalign|strdup|strndup|alloca'
outside='fopen|freopen|tmpfile|remove|rename|printf|puts|putchar|fputs|fwrite|time|clock|getenv|system|exit'

# look FILE NAMES WHY: every call of one of the names in the file is a fault.
look() {
  local line text
  while IFS=: read -r line text; do
    fault "$1:$line" "calls $(grep -oE "\\b($2)\\b" <<<"$text" | head -n 1); $3"
  done < <(code_of "$1" | grep -nE "(^|[^A-Za-z0-9_>.])($2)[[:space:]]*\(" || true)
}

count=0
while read -r file; do
  count=$((count + 1))
  look "$file" "$everywhere" "use the bounded or checked form"
  case $file in
    core/*_new.c | */work.c) ;;
    core/query/* | core/closure/* | core/solve/* | core/limb/*)
      look "$file" "$allocation" "a question never allocates: take the room from the work object"
      ;;
  esac
  case $file in
    core/*) look "$file" "$outside" "core knows no files, no clock, no output" ;;
    tests/*)
      look "$file" "assert_float_equal|assert_float_not_equal" "it casts to float: use lwt_near"
      look "$file" "skip" "a case that is skipped checks nothing: say what is missing and fail"
      ;;
  esac
done < <(files "$c_files" core server clients tests)

finish "banned calls ($count files)"
