#!/usr/bin/env bash
# Runs the tests of the device packages on two foreign processors, emulated by
# qemu-user: 64-bit ARM, and ARMv6 with its 32-bit integers and its demand for
# alignment. The tests are short ones: the same code paths, fewer draws.
#
#   device/under_qemu.sh [arm64|arm ...]
#
# Where the emulator is missing it says so and passes, unless GAUGELOG_CI=1.
set -euo pipefail
cd "$(dirname "$0")/.."
bin=$(mktemp -d)
trap 'rm -rf "$bin"' EXIT

for arch in "${@:-arm64 arm}"; do for arch in $arch; do
    case $arch in
    arm64) emulator=qemu-aarch64-static ;;
    arm) emulator=qemu-arm-static ;;
    *) echo "under_qemu.sh: no emulator is known for $arch" >&2; exit 2 ;;
    esac
    if ! command -v "$emulator" >/dev/null; then
        echo "under_qemu.sh: $emulator is not installed (Debian: qemu-user-static)" >&2
        [ "${GAUGELOG_CI:-}" = 1 ] && exit 1
        continue
    fi
    for package in $(go list ./device/...); do
        folder=${package#gaugelog/}
        test=$bin/$arch-${folder//\//-}
        CGO_ENABLED=0 GOARCH=$arch GOARM=6 go test -c -o "$test" "./$folder"
        [ -e "$test" ] || continue # has no tests
        started=$(date +%s)
        (cd "$folder" && "$emulator" "$test" -test.short -test.timeout 5m)
        echo "$folder on $arch: $(( $(date +%s) - started )) s"
    done
done; done
