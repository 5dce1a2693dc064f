#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Files of at most 700 lines; C lines of at most 100 columns, without tabs or trailing blanks.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

count=0
while read -r file; do
  count=$((count + 1))
  lines=$(wc -l <"$file")
  [ "$lines" -le 700 ] ||
    fault "$file:$lines" "$lines lines; above 700 a file holds two thoughts: split it between them"
  [[ $file =~ $c_files ]] || continue
  while IFS=$'\t' read -r place what; do
    fault "$place" "$what"
  done < <(perl -CSD -ne '
    chomp;
    my $n = length;
    print "$ARGV:$.\t$n columns; at most 100\n" if $n > 100;
    print "$ARGV:$.\ta tab; indent by blanks\n" if /\t/;
    print "$ARGV:$.\ttrailing blanks\n" if /\s$/;' "$file")
done < <(files "$source_files" "${rooms[@]}")

finish "sizes ($count files)"
