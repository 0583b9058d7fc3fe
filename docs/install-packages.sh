#!/usr/bin/env bash
# Installs what coldpin needs from Debian 12's own packages, and nothing that is there already.
#   bash docs/install-packages.sh build     to build and run the program
#   bash docs/install-packages.sh tests     besides, to build and run every test
set -euo pipefail

build_packages=(g++ cmake ninja-build pkg-config
  portaudio19-dev libfftw3-dev libsndfile1-dev libfmt-dev libcli11-dev libtomlplusplus-dev nlohmann-json3-dev
  libeigen3-dev libboost-dev)
test_packages=(libgtest-dev libgmock-dev libbenchmark-dev git clang clang-format clang-tidy
  jackd2 libjack-jackd2-dev util-linux procps python3 python3-numpy python3-scipy)

case "${1:-}" in
  build) wanted=("${build_packages[@]}") ;;
  tests) wanted=("${build_packages[@]}" "${test_packages[@]}") ;;
  *) echo "usage: install-packages.sh build|tests" >&2; exit 2 ;;
esac

missing=()
for package in "${wanted[@]}"; do
  dpkg-query -W -f '${db:Status-Status}' "$package" 2>/dev/null | grep -qx installed || missing+=("$package")
done
if [ ${#missing[@]} -eq 0 ]; then
  echo "packages: all ${#wanted[@]} are installed"
  exit 0
fi

as_root=()
if [ "$(id -u)" -ne 0 ]; then
  if ! command -v sudo >/dev/null; then
    echo "These packages are missing and this is not root: ${missing[*]}" >&2
    echo "Install them as root: apt-get install ${missing[*]}" >&2
    exit 1
  fi
  as_root=(sudo)
fi
echo "packages: installing ${missing[*]}"
export DEBIAN_FRONTEND=noninteractive
"${as_root[@]}" apt-get update -q
"${as_root[@]}" apt-get install -y -q --no-install-recommends "${missing[@]}" </dev/null
