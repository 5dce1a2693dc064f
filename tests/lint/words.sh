#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Words that must not stand in any file: paths of one person's machine, work left over without the
# number of its issue. (The patterns are written so that they do not match themselves.)
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

# A document has a member "home", so JSON pointers such as /home/drives are no paths.
paths='(^|[^A-Za-z0-9_.}$-])/(home/(?!(drives|pose|joints|bodies|mode|near)\b)[a-z]|root/|Users/'
paths+='|(wor|far)[km]/|tmp/b[r]ief|tmp/build-[a-z])|[.][.]/sh[a]red'
left='(^|[^A-Za-z_])(TO[D]O($|[^(A-Za-z_]|\([^0-9])|FIX[M]E|X[X]X)([^A-Za-z_]|$)'

# look PATTERN SENTENCE FILE...
look() {
  local pattern=$1 sentence=$2 file line rest
  shift 2
  while IFS=: read -r file line rest; do
    fault "$file:$line" "$sentence: ${rest:0:80}"
  done < <(grep -nIP "$pattern" /dev/null "$@" || true)
}

mapfile -t all < <(files . "${rooms[@]}" .ci README.md DEVELOPERS.md CMakeLists.txt |
  grep -v '^tests/fuzz/corpus/')
look "$paths" "a path of one machine" "${all[@]}"
look "$left" "work left over: finish it, or write TO""DO(issue number)" "${all[@]}"

finish "words (${#all[@]} files)"
