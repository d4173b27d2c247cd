# shellcheck shell=sh
# Prepares a Debian-like machine; sourced in the top folder by scripts/demo, scripts/test and .ci/run.
# Every step looks first and installs only what is missing, saying what and why.

say() { printf '%s\n' "$*"; }
stop() { printf 'stopped: %s\n' "$*" >&2; exit 1; }

# apt_install PACKAGE... : installs with root rights, or stops with the command to ask an administrator for.
apt_install() {
    command -v apt-get >/dev/null 2>&1 || stop "this machine has no apt-get; install the counterparts of: $*"
    if [ "$(id -u)" -eq 0 ]; then
        as_root=
    elif command -v sudo >/dev/null 2>&1 && sudo -n true 2>/dev/null; then
        as_root='sudo -n'
    else
        stop "may not install here (neither root nor sudo without a password). Ask for: apt-get install $*"
    fi
    log=$(mktemp)
    # shellcheck disable=SC2086
    if ! { $as_root apt-get update && $as_root env DEBIAN_FRONTEND=noninteractive apt-get install -y --no-install-recommends "$@"; } >"$log" 2>&1; then
        tail -n 15 "$log" >&2
        rm -f "$log"
        stop "apt-get install $* failed"
    fi
    rm -f "$log"
}

# A linker for Rust, and the HDF5 library that snapshots are read with.
need_system() {
    missing=
    if ! command -v cc >/dev/null 2>&1; then
        say "missing: a C compiler (Rust links with it): installing gcc, libc6-dev"
        missing="$missing gcc libc6-dev"
    fi
    if ! command -v pkg-config >/dev/null 2>&1; then
        say "missing: pkg-config (the build finds HDF5 with it): installing pkg-config"
        missing="$missing pkg-config"
    fi
    if [ -z "${HDF5_DIR:-}" ] && ! pkg-config --exists hdf5 2>/dev/null && ! pkg-config --exists hdf5-serial 2>/dev/null; then
        say "missing: the HDF5 library (snapshots are read with it): installing libhdf5-dev"
        missing="$missing libhdf5-dev"
    fi
    # shellcheck disable=SC2086
    [ -z "$missing" ] || apt_install $missing
}

# rust_is_new_enough : whether cargo runs and is at least the rust-version of Cargo.toml.
rust_is_new_enough() {
    have=$(rustc --version 2>/dev/null | sed -n 's/^rustc \([0-9]*\.[0-9]*\).*/\1/p')
    [ -n "$have" ] && cargo --version >/dev/null 2>&1 || return 1
    [ "${have%%.*}" -gt "${rust_wanted%%.*}" ] ||
        { [ "${have%%.*}" -eq "${rust_wanted%%.*}" ] && [ "${have#*.}" -ge "${rust_wanted#*.}" ]; }
}

need_rust() {
    rust_wanted=$(sed -n 's/^rust-version = "\([0-9]*\.[0-9]*\).*/\1/p' Cargo.toml)
    rust_is_new_enough && return
    # An earlier run may have installed it without it being on the PATH of this shell.
    PATH="${CARGO_HOME:-$HOME/.cargo}/bin:$PATH"
    export PATH
    rust_is_new_enough && return
    if command -v rustup >/dev/null 2>&1; then
        say "missing: Rust $rust_wanted or newer (the program is written in it): installing the stable toolchain with rustup"
        rustup toolchain install stable --profile minimal || stop "rustup could not install the stable toolchain"
        RUSTUP_TOOLCHAIN=stable
        export RUSTUP_TOOLCHAIN
    else
        say "missing: Rust $rust_wanted or newer (the program is written in it): installing it for this user into ${CARGO_HOME:-$HOME/.cargo} with its official installer"
        command -v curl >/dev/null 2>&1 || {
            say "missing: curl (downloads the Rust installer): installing curl, ca-certificates"
            apt_install curl ca-certificates
        }
        installer=$(mktemp)
        curl --proto '=https' --tlsv1.2 -sSf https://sh.rustup.rs -o "$installer" || stop "cannot download the Rust installer; see https://rustup.rs"
        sh "$installer" -y --profile minimal --no-modify-path || stop "the Rust installer failed; see https://rustup.rs"
        rm -f "$installer"
        say "Rust is in ${CARGO_HOME:-$HOME/.cargo}/bin; put that folder on your PATH to call cargo yourself"
    fi
    rust_is_new_enough || stop "Rust $rust_wanted or newer is needed, found ${have:-none}"
}

# Python with the libraries of tests/outside, in .venv of this folder. Sets $python.
need_python() {
    python=.venv/bin/python
    wanted=tests/outside/requirements.txt
    if [ -x "$python" ] && cmp -s "$wanted" .venv/requirements.txt; then
        return
    fi
    if ! python3 -c 'import ensurepip, venv' >/dev/null 2>&1; then
        say "missing: Python with venv (the outside checks run in it): installing python3, python3-venv"
        apt_install python3 python3-venv
    fi
    python3 -c 'import sys; sys.exit(sys.version_info < (3, 11))' ||
        stop "the outside checks need Python 3.11 or newer, found $(python3 --version 2>&1)"
    say "installing into .venv, for the outside checks: $(grep -v '^#' "$wanted" | tr '\n' ' ')"
    rm -rf .venv
    python3 -m venv .venv || stop "cannot make .venv"
    "$python" -m pip install --quiet --disable-pip-version-check -r "$wanted" || stop "pip could not install $wanted"
    cp "$wanted" .venv/requirements.txt
}
