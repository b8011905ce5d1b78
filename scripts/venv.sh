# Sourced by the other scripts: an environment of the project's own in .venv, with driftrose in it.
#
#     install ""        what running takes
#     install test      what the test suite takes too
#     install dev       all that a contributor uses
#
# Sets root, venv and python (the one in .venv). Nothing outside .venv is touched, and no step needs root.

root="$(CDPATH='' cd -- "$(dirname -- "${BASH_SOURCE[0]}")/.." && pwd -P)"
venv="$root/.venv"
python="$venv/bin/python"
export PIP_DISABLE_PIP_VERSION_CHECK=1 PIP_NO_INPUT=1

say() { printf '%s\n' "$*" >&2; }

# A missing system package: one line, exit status 2.
missing() {
    say "driftrose: $*"
    exit 2
}

# Prints the first Python that is new enough and can make an environment.
find_python() {
    local name found=""
    for name in python3 python3.14 python3.13 python3.12 python3.11 python; do
        command -v "$name" >/dev/null || continue
        "$name" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null || continue
        found="${found:-$name}"
        if "$name" -c 'import ensurepip, venv' 2>/dev/null; then
            printf '%s\n' "$name"
            return
        fi
    done
    [ -n "$found" ] || missing "python3 is missing, or older than 3.11; on Debian: apt install python3 python3-venv"
    missing "python3-venv is missing for $(command -v "$found"); on Debian: apt install python3-venv"
}

# What an installed environment depends on: its Python, where it stands, what the project asks for. Empty when .venv is unusable.
fingerprint() {
    "$python" -c 'import pip, sys; print(sys.version); sys.exit(sys.version_info < (3, 11))' 2>/dev/null || return 0
    printf '%s\n' "$root"
    cksum <"$root/pyproject.toml"
    cksum <"$root/tracer/__init__.py"
}

# An environment that was made elsewhere and moved here does not work; one that somebody else made here is kept.
moved() { [ -e "$venv/stands-at" ] && [ "$(cat "$venv/stands-at")" != "$root" ]; }

install() {
    local extra="$1" stamp="$venv/installed-${1:-run}" state base
    state="$(fingerprint)"
    if [ -n "$state" ] && [ "$(cat "$stamp" 2>/dev/null)" = "$state" ]; then
        return
    fi
    if [ -z "$state" ] || moved; then
        base="$(find_python)"
        say "making .venv with $("$base" --version)"
        "$base" -m venv --clear "$venv"
        printf '%s\n' "$root" >"$venv/stands-at"
    fi
    say "installing driftrose${extra:+ for $extra} and what it needs into .venv"
    if ! "$python" -m pip install --quiet --editable "$root${extra:+[$extra]}"; then
        say "driftrose: not installed: pip's message stands above; without a network nothing can be fetched"
        exit 1
    fi
    fingerprint >"$stamp"
    [ -z "$extra" ] || fingerprint >"$venv/installed-run"
}
