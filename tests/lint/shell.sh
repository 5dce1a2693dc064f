#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# Shell scripts read without error by bash, and by shellcheck, which tests/run installs.
set -euo pipefail
# shellcheck source=tests/lint/files.sh
source "$(dirname "${BASH_SOURCE[0]}")/files.sh"

mapfile -t scripts < <(files . "${rooms[@]}" .ci | while read -r file; do
  case $file in
    *.sh) echo "$file" ;;
    *) [[ $(head -c 40 "$file" | tr -d '\0' | head -n 1) =~ ^'#!'.*(bash|/sh) ]] && echo "$file" ;;
  esac
done || true)
for script in "${scripts[@]}"; do
  bash -n "$script" || fault "$script" "bash cannot read it"
done
if command -v shellcheck >/dev/null; then
  shellcheck -x -S style "${scripts[@]}" || fault "shellcheck" "see above"
else
  fault "shellcheck" "not installed: apt-get install shellcheck"
fi
finish "shell scripts (${#scripts[@]} files)"
