#!/usr/bin/env bash
# Installs what the tests need of the Debian system and is missing: as root by apt-get, else by sudo; where neither is
# possible it prints the line to run and stops with 2. A test is never skipped for want of a tool.
set -euo pipefail

missing() {
    local packages=()
    # Debian's own python3 and its ensurepip, for the bare environment of tests/wheel.sh.
    /usr/bin/python3 -c 'import ensurepip, venv' 2>/dev/null || packages+=(python3-venv)
    command -v srec_cat >/dev/null || packages+=(srecord)         # HEX and S-record files that are not ours
    command -v objcopy >/dev/null || packages+=(binutils)         # likewise
    ls /usr/share/seabios/*.bin >/dev/null 2>&1 || packages+=(seabios) # real option-ROM images
    command -v tmux >/dev/null || packages+=(tmux)                # a terminal of a known size
    command -v git >/dev/null || packages+=(git)                  # which files belong to the project
    echo "${packages[*]}"
}

packages=$(missing)
[ -n "$packages" ] || exit 0

install() { # with the package lists at hand; where they do not do, with fresh ones
    local become=()
    if [ "$(id -u)" != 0 ]; then
        # A sudo that wants a password can ask for it only at a terminal.
        command -v sudo >/dev/null && { [ -t 0 ] || sudo -n true 2>/dev/null; } || return 1
        become=(sudo)
    fi
    get() { "${become[@]}" env DEBIAN_FRONTEND=noninteractive apt-get -qq -y "$@" </dev/null >/dev/null; }
    get install --no-install-recommends "$@" 2>/dev/null || { get update && get install --no-install-recommends "$@"; }
}

if command -v apt-get >/dev/null; then
    echo "installing $packages"
    # Word splitting is wanted: one argument a package. A failure shows below, as a package that is still missing.
    # shellcheck disable=SC2086
    install $packages || true
fi

packages=$(missing)
if [ -n "$packages" ]; then
    echo "The tests need packages that could not be installed from here. Run this as root, then again:" >&2
    echo "  apt-get update && apt-get install -y --no-install-recommends $packages" >&2
    exit 2
fi
