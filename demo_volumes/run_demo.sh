#!/usr/bin/env bash
# Installs what is missing (Debian 12 or 13, as root or through sudo), builds, makes the demo casting, inspects it
# and says what came out. Ends with status 0 when the verdict, its reasons and the values are those of the
# casting's truth file. A folder for the output may be given; the default is build/demo.
set -euo pipefail
here=$(cd "$(dirname "$0")/.." && pwd)
out=${1:-$here/build/demo}
mkdir -p "$out"
out=$(cd "$out" && pwd)
cd "$here"

bash .ci/install_packages.sh
cmake --preset release >"$out/build.log" || { tail -n 40 "$out/build.log" >&2; exit 1; }
cmake --build --preset release --target halfmark demo_check

halfmark=build/release/cli/halfmark
"$halfmark" demo bracket --out "$out"
status=0
"$halfmark" inspect "$out/bracket.mha" --spec "$out/bracket.spec.json" --out "$out/bracket_inspection" || status=$?
echo
echo "inspect ended with status $status (0 accept, 1 reject, 2 undecided)"
echo "report: $out/bracket_inspection/report.html"
exec build/release/demo_volumes/demo_check "$out/bracket_inspection/result.json" "$out/bracket.truth.json" "$status"
