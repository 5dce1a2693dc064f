#!/usr/bin/env bash
# SPDX-License-Identifier: GPL-3.0-or-later
# The checks of the checks: a small tree without faults passes each of them; each single fault
# planted in it is found, in its place.
set -euo pipefail
here=$(cd "$(dirname "${BASH_SOURCE[0]}")" && pwd)
scratch=$(mktemp -d)
trap 'rm -rf "$scratch"' EXIT
tree=$scratch/tree
spdx='/* SPDX-License-Identifier: GPL-3.0-or-later */'
head='/* A file of the small tree. */'
missed=0
planted=0

c_file() { # path, then lines of code
  mkdir -p "$(dirname "$1")"
  local path=$1
  shift
  printf '%s\n' "$spdx" "$head" "$@" >"$path"
}

clean_tree() {
  rm -rf "$tree"
  mkdir -p "$tree" && cd "$tree"
  mkdir -p core/query core/math core/include/leeway server/http server/codec server/catalog \
    clients/cli deploy tests/core tests/run.d .ci build
  touch README.md DEVELOPERS.md CMakeLists.txt
  echo 'GNU GENERAL PUBLIC LICENSE' >LICENSE
  c_file core/include/leeway/a.h '#include <stddef.h>'
  c_file core/math/gsl_room.c '#include <gsl/gsl_linalg.h>' '#include <math.h>'
  c_file core/query/q.c '#include <leeway/a.h>' '/* sprintf( and malloc( are only named here */'
  c_file core/query/work.c 'void *f(void);' 'void *f(void) { return malloc(8); }'
  c_file server/http/listener.c '#include <microhttpd.h>' '#include "../exchange.h"'
  c_file server/codec/in.c '#include <cjson/cJSON.h>' '#include <leeway/a.h>'
  c_file server/catalog/catalog.c '#include <sqlite3.h>'
  c_file clients/cli/main.c '#include <curl/curl.h>' '#include "args.h"'
  c_file clients/cli/args.h 'int args(void);'
  c_file tests/core/test_a.c '#include "lwt.h"' '/* TO''DO(12): more */'
  echo '* include/leeway/a.h math/gsl_room.c query/q.c query/work.c' >core/MAP.md
  echo '* http/listener.c codec/in.c catalog/catalog.c' >server/MAP.md
  echo '* cli/main.c cli/args.h' >clients/MAP.md
  echo '* core/test_a.c' >tests/MAP.md
  echo '* nothing yet' >deploy/MAP.md
}

# finds CHECK WORDS: the check fails on the tree and its output holds the words; a clean tree again.
finds() {
  local text status=0
  planted=$((planted + 1))
  text=$(bash "$here/$1.sh" "$tree" 2>&1) || status=$?
  if [ "$status" -ne 1 ] || ! grep -qF -- "$2" <<<"$text"; then
    printf '%s did not find: %s (status %s)\n%s\n' "$1" "$2" "$status" "$text"
    missed=$((missed + 1))
  fi
  clean_tree
}

clean_tree
for check in boundaries banned maps sizes toplevel words spdx; do
  text=$(bash "$here/$check.sh" "$tree" 2>&1) || {
    printf '%s found a fault in the clean tree:\n%s\n' "$check" "$text"
    missed=$((missed + 1))
  }
done

echo '#include <microhttpd.h>' >>server/codec/in.c; finds boundaries server/codec/in.c:5
echo '#include <cJSON.h>' >>server/http/listener.c; finds boundaries server/http/listener.c:5
echo '#include <sqlite3.h>' >>server/http/listener.c; finds boundaries "the database"
echo '#include <gsl/gsl_math.h>' >>core/query/q.c; finds boundaries "numerics library"
echo '#include <time.h>' >>core/query/q.c; finds boundaries "<time.h>"
echo '#include "../../server/exchange.h"' >>core/query/q.c; finds boundaries "not in core"
echo '#include <leeway/a.h>' >>clients/cli/main.c; finds boundaries "speak HTTP only"
echo '#include "../../server/exchange.h"' >>clients/cli/main.c; finds boundaries "own"
echo '#include <leeway/a.h>' >>server/catalog/catalog.c; finds boundaries "text and digests"
echo 'int g(void) { return sprintf(0, ""); }' >>server/codec/in.c; finds banned server/codec/in.c:5
echo 'void g(void *j) { lwd_json_key(j, "a\"b"); }' >>server/codec/in.c; finds banned "literal key"
echo 'int g(void) { return atoi (""); }' >>clients/cli/main.c; finds banned "calls atoi"
echo 'int g(void) { return malloc(1) != 0; }' >>core/query/q.c; finds banned "never allocates"
c_file core/homotopy/track.c 'int g(void) { return malloc(1) != 0; }'; finds banned "never allocates"
echo 'int g(void) { return fopen("", "") != 0; }' >>core/math/gsl_room.c; finds banned "fopen"
echo 'void g(void) { skip(); }' >>tests/core/test_a.c; finds banned "calls skip"
c_file core/query/new.c 'int n;'; finds maps "core/query/new.c: not named"
rm core/query/q.c; finds maps "names query/q.c, which is not there"
rm server/MAP.md; finds maps "server/MAP.md: missing"
printf '\n%.0s' {1..701} >>core/query/q.c; finds sizes core/query/q.c
printf '/* %0120d */\n' 1 >>core/query/q.c; finds sizes "126 columns"
printf '\tint t;\n' >>core/query/q.c; finds sizes "a tab"
mkdir docs; finds toplevel docs
touch notes.txt; finds toplevel notes.txt
rm LICENSE; finds toplevel "LICENSE: missing"
echo '/* see /home/''somebody/file */' >>core/query/q.c; finds words core/query/q.c:5
echo '/* TO''DO: finish */' >>core/query/q.c; finds words core/query/q.c:5
echo 'FIX''ME later' >>README.md; finds words README.md:1
sed -i 1d server/codec/in.c; finds spdx server/codec/in.c:1
sed -i 2d server/codec/in.c; finds spdx server/codec/in.c:2
echo 'echo x' >tests/run.d/a.sh; finds spdx tests/run.d/a.sh
printf '#!/usr/bin/env bash\nif then\n' >deploy/up; finds shell deploy/up

printf 'lint self-test: %d faults planted, %d missed\n' "$planted" "$missed"
[ "$missed" -eq 0 ]
