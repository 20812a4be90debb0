#!/usr/bin/env bash
# Installs what Halfmark needs to be built, tested and run on Debian 12 or 13, as root or through sudo. Asks apt
# only when something is missing, so that it can be run again at any time, also without a network.
set -euo pipefail

packages=(
  build-essential cmake ninja-build ccache
  # volumes, meshes, pictures: ITK reads formats, VTK draws and writes; both look for what they were built with
  libinsighttoolkit5-dev libgdcm-dev libtiff-dev libvtk9-dev libopenmpi-dev
  # report and viewer
  qt6-base-dev
  # numbers, threads, JSON, options, hashes
  libeigen3-dev libtbb-dev libnanoflann-dev nlohmann-json3-dev libvalijson-dev libcli11-dev libssl-dev
  # tests and benchmarks
  catch2 librapidcheck-dev libbenchmark-dev poppler-utils
  # pictures without a display, and a font for them
  libegl1 libegl-mesa0 libglx-mesa0 libgl1-mesa-dri fonts-dejavu-core
)
# Qt's OpenGL headers are a package of their own on Debian 12 and part of qt6-base-dev since.
version=$(. /etc/os-release && echo "${VERSION_ID:-}")
if [ "$version" = 12 ]; then packages+=(libqt6opengl6-dev); fi

missing=()
for package in "${packages[@]}"; do
  status=$(dpkg-query -W -f='${Status}' "$package" 2>/dev/null || true)
  if [ "$status" != "install ok installed" ]; then missing+=("$package"); fi
done
if [ ${#missing[@]} -eq 0 ]; then exit 0; fi

as_root=()
if [ "$(id -u)" -ne 0 ]; then
  if ! command -v sudo >/dev/null; then
    echo "These packages are missing: ${missing[*]}. Run this as root, or install sudo." >&2
    exit 1
  fi
  as_root=(sudo)
fi
echo "Installing ${#missing[@]} packages: ${missing[*]}"
log=$(mktemp)
apt() {
  if ! "${as_root[@]}" env DEBIAN_FRONTEND=noninteractive apt-get -q -y "$@" >"$log" 2>&1; then
    tail -n 30 "$log" >&2
    echo "apt-get $1 failed; the whole log is $log" >&2
    exit 1
  fi
}
apt update
apt install --no-install-recommends "${missing[@]}"
rm -f "$log"
