#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Shell scripts read without error by bash, and by shellcheck, which tests/run installs.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

# What ends in .sh, and what begins as a shell script.
# shellcheck disable=SC2016 # the dollar signs are those of perl
mapfile -t scripts < <(files . "${rooms[@]}" .ci | tr '\n' '\0' | xargs -0 -r perl -e '
  for my $file (@ARGV) {
    open my $in, "<:raw", $file or next;
    read $in, my $top, 40;
    print "$file\n" if $file =~ /\.sh$/ || $top =~ m{^#![^\n]*(bash|/sh)};
  }')
for script in "${scripts[@]}"; do
  bash -n "$script" || fault "$script" "bash cannot read it"
done
if command -v shellcheck >/dev/null; then
  shellcheck -x -S style "${scripts[@]}" || fault "shellcheck" "see above"
else
  fault "shellcheck" "not installed: apt-get install shellcheck"
fi
finish "shell scripts (${#scripts[@]} files)"
