#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Every source file is named in the MAP.md of its room, by its path within the room, and every file
# that a map names is there.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

count=0
for room in "${rooms[@]}"; do
  [ -d "$room" ] || continue
  map=$room/MAP.md
  if [ ! -f "$map" ]; then
    fault "$map" "missing: one line a file of $room"
    map=/dev/null
  fi
  named=$(grep -oE '[A-Za-z0-9_][A-Za-z0-9_./-]*' "$map" | sed 's/[.]$//' | LC_ALL=C sort -u || true)
  here=$(files "$source_files" "$room" | sed "s|^$room/||")
  count=$((count + $(grep -c . <<<"$here" || true)))
  while read -r file; do
    [ -z "$file" ] || fault "$room/$file" "not named in $room/MAP.md"
  done < <(LC_ALL=C comm -23 <(LC_ALL=C sort -u <<<"$here") <(printf '%s\n' "$named"))
  while read -r name; do
    [ -n "$name" ] || continue
    [ -e "$room/$name" ] || [ -e "$name" ] || [ -e "$room/include/$name" ] ||
      fault "$room/MAP.md" "names $name, which is not there"
  done < <(grep -E '/.*\.(c|h|inc|cpp|py|sh|js|mjs|sql)$' <<<"$named" || true)
done

finish "maps ($count files)"
