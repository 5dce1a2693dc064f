#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# The licence line: first in every C file and followed by the head comment; within the first three
# lines of every script.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

export id='SPDX-License-Identifier: GPL-3.0-or-later'
mapfile -t all < <(files "$source_files" "${rooms[@]}")

# One line a fault: place, tab, sentence.
look() {
  [ "$#" -gt 0 ] || return 0
  perl -e '
    my $id = $ENV{id};
    for my $file (@ARGV) {
      open my $in, "<", $file or die "$file: $!";
      my @top = map { scalar(<$in>) // "" } 1 .. 3;
      chomp @top;
      if ($file =~ /$ENV{c_files}/) {
        my $ok = $top[0] eq "/* $id */" || ($file =~ /\.cpp$/ && $top[0] eq "// $id");
        print "$file:1\tthe first line must be /* $id */\n" unless $ok;
        print "$file:2\tthe head comment is missing: what the file owns, and who may call\n"
          unless $top[1] =~ m{^(/\*|//)};
      } else {
        print "$file:1\tno $id in the first three lines\n" unless "@top" =~ /\Q$id\E/;
      }
    }' "$@"
}

while IFS=$'\t' read -r place what; do
  fault "$place" "$what"
done < <(look "${all[@]}")

grep -qs 'GNU GENERAL PUBLIC LICENSE' LICENSE ||
  fault LICENSE "the text of the GNU General Public License, version 3, is missing"
finish "licence lines (${#all[@]} files)"
