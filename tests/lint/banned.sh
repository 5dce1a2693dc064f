#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Calls that must not stand in the code: unbounded or unchecked ones everywhere, allocation where
# questions are answered, the outside world in core, and checks in tests that cannot do their job.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

everywhere=' sprintf vsprintf strcpy strcat strncpy strtok atoi atol atoll atof gets rand srand setenv putenv '
allocation=' malloc calloc realloc aligned_alloc posix_memalign strdup strndup alloca '
outside=' fopen freopen tmpfile remove rename printf puts putchar fputs fwrite time clock getenv system exit '
in_tests=' assert_float_equal assert_float_not_equal skip '

mapfile -t all < <(files "$c_files" core server clients tests)

# Every call in the files as file:line:name; comments and texts are blanked first.
calls() {
  [ "$#" -gt 0 ] || return 0
  perl -e '
    local $/;
    for my $file (@ARGV) {
      open my $in, "<", $file or die "$file: $!";
      my $code = <$in>;
      $code =~ s{(/\*.*?\*/)|(//[^\n]*)|("(?:\\.|[^"\\\n])*")|(\x27(?:\\.|[^\x27\\\n])*\x27)}
        { my $x = defined $3 ? "\"\"" : defined $4 ? "0" : " ";
          my $n = () = $& =~ /\n/g; $x . "\n" x $n }gsex;
      my $line = 1;
      for my $text (split /\n/, $code) {
        print "$file:$line:$1\n" while $text =~ /(?<![A-Za-z0-9_>.])([a-z_]+)\s*\(/g;
        $line++;
      }
    }' "$@"
}

# A key that is a literal is written without looking for what must be escaped (codec/json_out.h).
mapfile -t server < <(files "$c_files" server)
escaped='lwd_json_(key|put_[a-z]+)[(][^,"]+, *"[^"]*[\]'
while IFS=: read -r file line _; do
  fault "$file:$line" "has a literal key with an escape; keys in the source are plain ASCII words"
done < <(grep -nE "$escaped" "${server[@]}" /dev/null || true)

while IFS=: read -r file line name; do
  place=$file:$line
  if [[ $everywhere == *" $name "* ]]; then
    fault "$place" "calls $name; use the bounded or checked form"
  fi
  if [[ $allocation == *" $name "* ]]; then
    case $file in
      core/*_new.c | core/*/work.c) ;;
      # Solution sets are made or loaded before a model is shared, never while a question is
      # answered; how many points a fibre has is only known once it is found.
      core/homotopy/fibre*.c | core/homotopy/sets*.c) ;;
      core/query/* | core/closure/* | core/solve/* | core/limb/* | core/homotopy/*)
        fault "$place" "calls $name; a question never allocates: take the room from the work object"
        ;;
    esac
  fi
  case $file in
    core/*)
      [[ $outside != *" $name "* ]] ||
        fault "$place" "calls $name; core knows no files, no clock, no output"
      ;;
    tests/*)
      case $in_tests in
        *" $name "*)
          fault "$place" "calls $name; it cannot fail as it should: use lwt_near, lwt_fail"
          ;;
      esac
      ;;
  esac
done < <(calls "${all[@]}")

finish "banned calls (${#all[@]} files)"
