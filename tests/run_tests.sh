#!/usr/bin/env bash
# Installs what is missing (Debian 12 or 13, as root or through sudo), builds with warnings as errors and runs
# every test. Ends with ctest's own status and closing lines.
set -euo pipefail
cd "$(dirname "$0")/.."

bash .ci/install_packages.sh
cmake --preset ci
cmake --build --preset ci
exec ctest --test-dir build/ci --output-on-failure -j2
