# Sourced by tests/run.sh and netlists/demo.sh: installs what is missing on Debian, and the package in .venv.
# Usage: source tests/setup.sh [EXTRA]   with EXTRA such as "test"; needs root or sudo only if packages are missing.
# After it, $PYTHON is the interpreter of the environment and $BOARDSIM the command.

set -euo pipefail
here=$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)
cd "$here"
extra=${1:-}

say() { printf 'set-up: %s\n' "$*" >&2; }
stop() { say "$*"; exit 2; }

missing=()
need() { "${@:2}" >/dev/null 2>&1 || missing+=("$1"); }
need ngspice command -v ngspice
need libngspice0 sh -c 'ldconfig -p | grep -q libngspice || ls /usr/lib/*/libngspice.so* || [ -n "${NGSPICE_LIBRARY_PATH:-}" ]'
need python3 command -v python3
need python3-venv python3 -c 'import ensurepip, venv'

if [ ${#missing[@]} -gt 0 ]; then
    command -v apt-get >/dev/null || stop "please install: ${missing[*]} (this script knows Debian's apt-get only)"
    root=()
    if [ "$(id -u)" -ne 0 ]; then
        command -v sudo >/dev/null || stop "please install as root: apt-get install ${missing[*]}"
        root=(sudo)
    fi
    say "installing ${missing[*]}"
    export DEBIAN_FRONTEND=noninteractive
    "${root[@]}" apt-get update -qq >&2 || say "apt-get update failed; trying with the old lists"
    "${root[@]}" apt-get install -y -qq --no-install-recommends "${missing[@]}" >&2 || stop "apt-get could not install ${missing[*]}"
fi

python3 -c 'import sys; sys.exit(sys.version_info < (3, 11))' || stop "Python 3.11 or later is needed; python3 is $(python3 --version)"

PYTHON=$here/.venv/bin/python
BOARDSIM=$here/.venv/bin/boardsim
"$PYTHON" -c '' >/dev/null 2>&1 || { say "making .venv"; rm -rf .venv; python3 -m venv .venv >&2; }
stamp=".venv/installed${extra:+-$extra}"
wanted=$(cat pyproject.toml boardsim/__init__.py | cksum)
if [ "$(cat "$stamp" 2>/dev/null)" != "$wanted" ]; then
    say "installing boardsim${extra:+ with its $extra tools} in .venv"
    "$PYTHON" -m pip install --quiet --disable-pip-version-check --editable ".${extra:+[$extra]}" >&2 || stop "pip could not install the package"
    printf '%s\n' "$wanted" >"$stamp"
fi
