#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# The licence line: first in every C file and followed by the head comment; within the first three
# lines of every script.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

id='SPDX-License-Identifier: GPL-3.0-or-later'
count=0
while read -r file; do
  count=$((count + 1))
  if [[ $file =~ $c_files ]]; then
    first=$(sed -n 1p "$file")
    [ "$first" = "/* $id */" ] || { [[ $file = *.cpp ]] && [ "$first" = "// $id" ]; } || fault "$file:1" "the first line must be /* $id */"
    [[ $(sed -n 2p "$file") =~ ^(/\*|//) ]] ||
      fault "$file:2" "the head comment is missing: what the file owns, and who may call"
  else
    grep -qF "$id" <(head -n 3 "$file") || fault "$file:1" "no $id in the first three lines"
  fi
done < <(files "$source_files" "${rooms[@]}")

grep -qs 'GNU GENERAL PUBLIC LICENSE' LICENSE ||
  fault LICENSE "the text of the GNU General Public License, version 3, is missing"
finish "licence lines ($count files)"
