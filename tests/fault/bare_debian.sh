#!/usr/bin/env bash
# SPDX-License-Identifier: MIT
# The two commands of the README on a bare Debian 12: makes a minimal root with mmdebstrap from this machine's own
# package sources, clones HEAD into it twice, and runs tests/run in one and config/demo/run in the other, then each a
# second time, since both may be run again. Prints what each took.
#     tests/fault/bare_debian.sh [SOURCES]      SOURCES: a sources list (default: this machine's for Debian)
# Needs root, mmdebstrap, systemd-nspawn and the network; ends with 77 where there is none. Takes some ten minutes and
# 2 GB below TMPDIR (default /var/tmp), which are given back. Not part of CI.
set -uo pipefail
here=$(cd "$(dirname "$0")" && pwd)

skip() {
    echo "SKIPPED: tests/fault/bare_debian.sh: $1"
    exit 77
}

[ "$(id -u)" -eq 0 ] || skip "it needs root"
for tool in mmdebstrap systemd-nspawn unshare git; do
    command -v $tool >/dev/null || skip "$tool is not installed"
done
sources=${1-}
for file in /etc/apt/sources.list.d/debian.sources /etc/apt/sources.list; do
    [ -n "$sources" ] || [ ! -s "$file" ] || sources=$file
done
[ -r "$sources" ] || skip "no package sources for Debian were found; name a file of them"
sources=$(realpath "$sources")

if [ -z "${FOREWATER_IN_OWN_NAMESPACE-}" ]; then
    unshare --mount --pid --fork --mount-proc true 2>/dev/null || skip "namespaces cannot be made here"
    exec env FOREWATER_IN_OWN_NAMESPACE=yes unshare --mount --pid --fork --kill-child --mount-proc \
        --propagation private bash "$here/$(basename "$0")" "$sources"
fi
cd "$here/../.." || exit 1

place=$(mktemp -d -p "${TMPDIR:-/var/tmp}") || exit 1
tidy() {
    umount -lR "$place" 2>/dev/null
    rm -rf --one-file-system "$place"
}
trap tidy EXIT
trap 'exit 130' INT TERM HUP

# systemd-nspawn keeps a folder per container there: not in this machine's /run
mkdir -p /run/systemd/nspawn
mount -t tmpfs tmpfs /run/systemd/nspawn || exit 1

failed=0
stage() { # name, command...: one line with its time; its last lines when it fails
    local name=$1 started=$SECONDS log
    shift
    log=$place/log
    if "$@" >"$log" 2>&1 </dev/null; then
        printf 'ok      %-46s %4d s\n' "$name" $((SECONDS - started))
    else
        failed=$((failed + 1))
        printf 'FAILED  %-46s %4d s\n' "$name" $((SECONDS - started))
        tail -n 40 "$log" | sed 's/^/        | /'
    fi
}
bare() { # root, command: what a person types there, with nothing of this machine's environment
    local root=$1
    shift
    env -i PATH=/usr/sbin:/usr/bin:/sbin:/bin TERM=dumb systemd-nspawn --quiet --directory="$place/$root" --register=no \
        --keep-unit --pipe --resolv-conf=copy-host --timezone=off --chdir=/root/forewater "$@"
}
last_lines() { # from which line on
    sed -n "/$1/,\$p" "$place/log" | sed 's/^/        | /'
}

stage 'a bare Debian 12 (mmdebstrap, minbase)' mmdebstrap --quiet --variant=minbase bookworm "$place/one" "$sources"
stage 'a fresh clone of HEAD' git clone --quiet "file://$PWD" "$place/one/root/forewater"
stage 'both once more' cp -a "$place/one" "$place/other"
[ $failed -eq 0 ] || exit 1
stage 'tests/run' bare one tests/run
last_lines '^packages '
stage 'tests/run, again' bare one tests/run
rm -rf --one-file-system "$place/one"
stage 'config/demo/run --short' bare other config/demo/run --short
last_lines '^live and replay'
stage 'config/demo/run --short, again' bare other config/demo/run --short

echo
[ $failed -eq 0 ] || { echo "$failed failed"; exit 1; }
echo "Both commands of the README work on a bare Debian 12."
