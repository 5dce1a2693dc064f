#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Files of at most 700 lines; C lines of at most 100 columns, without tabs or trailing blanks.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

mapfile -t all < <(files "$source_files" "${rooms[@]}")

# One line a fault: place, tab, sentence.
look() {
  [ "$#" -gt 0 ] || return 0
  perl -CSD -ne '
    my $line = $_;
    chomp $line;
    if ($ARGV =~ /$ENV{c_files}/) {
      my $n = length $line;
      print "$ARGV:$.\t$n columns; at most 100\n" if $n > 100;
      print "$ARGV:$.\ta tab; indent by blanks\n" if $line =~ /\t/;
      print "$ARGV:$.\ttrailing blanks\n" if $line =~ /\s$/;
    }
    if (eof) {
      print "$ARGV:$.\t$. lines; above 700 a file holds two thoughts: split it between them\n"
        if $. > 700;
      close ARGV;
    }' "$@"
}

while IFS=$'\t' read -r place what; do
  fault "$place" "$what"
done < <(look "${all[@]}")

finish "sizes (${#all[@]} files)"
