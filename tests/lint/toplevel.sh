#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# The top level holds these entries and names that begin with a dot, nothing else; `build` is where
# builds go and is ignored by git.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

wanted=(README.md DEVELOPERS.md CMakeLists.txt LICENSE server core tests clients deploy)
for name in "${wanted[@]}"; do
  [ -e "$name" ] || fault "$name" "missing at the top level"
done
while read -r name; do
  case " ${wanted[*]} build " in
    *" $name "*) ;;
    *) fault "$name" "must not stand at the top level: move it into the room it belongs to" ;;
  esac
done < <(find . -mindepth 1 -maxdepth 1 ! -name '.*' -printf '%f\n' | LC_ALL=C sort)

finish "top level"
