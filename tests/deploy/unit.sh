#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# The systemd units that are offered: they read without complaint, and the service's exposure, as
# systemd-analyze rates it from 0 to 100, stays low. No systemd has to run for it.
set -euo pipefail
units=$(cd "$(dirname "${BASH_SOURCE[0]}")/../../deploy/systemd" && pwd)
scratch=$(mktemp -d)
trap 'rm -rf "$scratch"' EXIT

# The program is not installed on the machine that tests; what matters here is the rest.
sed 's|^ExecStart=/usr/local/bin/leewayd|ExecStart=/bin/true|' "$units/leewayd.service" \
  >"$scratch/leewayd.service"
cp "$units/leewayd.socket" "$scratch/"
text=$(SYSTEMD_LOG_LEVEL=warning systemd-analyze verify --man=no "$scratch/leewayd.service" \
  "$scratch/leewayd.socket" 2>&1) || { printf '%s\n' "$text"; exit 1; }
if grep -qE 'leewayd\.(service|socket)' <<<"$text"; then
  printf 'systemd complains:\n%s\n' "$text"
  exit 1
fi
systemd-analyze security --offline=yes --threshold=15 --no-pager "$scratch/leewayd.service" | tail -n 1
