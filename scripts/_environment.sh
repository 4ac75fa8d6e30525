# shellcheck shell=bash
# Makes the Python environment of this clone and checks the system's libraries. The scripts beside it source this file:
#
#   source "$(dirname -- "${BASH_SOURCE[0]}")/_environment.sh"
#   prepare_environment [test] [lowest]      # then "$python" is the environment's interpreter
#
# It speaks on stderr only, one line for each thing that takes time, and ends the script with exit code 2 and one line
# where something is missing that it cannot bring itself.

set -euo pipefail

repository=$(cd -- "$(dirname -- "${BASH_SOURCE[0]}")/.." && pwd)
environment="$repository/.venv"
python="$environment/bin/python"

# What the gmsh wheel is linked against, and what VTK needs to render: library, then its package on Debian and Ubuntu.
system_libraries=(
    "libGLU.so.1 libglu1-mesa"
    "libXcursor.so.1 libxcursor1"
    "libXft.so.2 libxft2"
    "libXinerama.so.1 libxinerama1"
    "libXrender.so.1 libxrender1"
    "libgomp.so.1 libgomp1"
    "libGL.so.1 libgl1"
    "libEGL.so.1 libegl1"
)

# What the checks need to look at a report as its readers do: a program, then its package on Debian.
test_programs=(
    "chromium chromium"
    "chromedriver chromium-driver"
)

say() { printf 'wiresolve: %s\n' "$*" >&2; }

stop() {
    say "$@"
    exit 2
}

# The first interpreter that is new enough, its full path on stdout.
find_python() {
    local name
    for name in python3 python3.14 python3.13 python3.12 python3.11; do
        if "$name" -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
            "$name" -c 'import sys; print(sys.executable)'
            return
        fi
    done
    if command -v python3 >/dev/null; then
        stop "needs Python 3.11 or later, and python3 here is $(python3 -c 'import platform; print(platform.python_version())' 2>&1)"
    fi
    stop "needs Python 3.11 or later, and there is no python3; on Debian or Ubuntu: sudo apt-get install python3 python3-venv"
}

# Of the libraries named in `system_libraries`, the lines of those that the loader of interpreter $1 does not find.
missing_libraries() {
    "$1" - "${system_libraries[@]}" <<'PYTHON'
import ctypes
import sys

for line in sys.argv[1:]:
    try:
        ctypes.CDLL(line.split()[0])
    except OSError:
        print(line)
PYTHON
}

# Of the programs named in `test_programs`, the lines of those that are not on the path.
missing_programs() {
    local line
    for line in "${test_programs[@]}"; do
        command -v "${line%% *}" >/dev/null || printf '%s\n' "$line"
    done
}

# Installs as root where there is apt-get what a function says is missing; elsewhere names the line to type and stops.
# $1: what it is ("system libraries"); then the function that prints lines of a name and its package, and its arguments.
require() {
    local kind=$1 missing names packages
    shift
    [[ $(uname -s) == Linux ]] || return 0
    missing=$("$@")
    [[ -n $missing ]] || return 0
    names=$(cut -d' ' -f1 <<<"$missing" | paste -sd' ')
    packages=$(cut -d' ' -f2 <<<"$missing" | paste -sd' ')
    if ! command -v apt-get >/dev/null; then
        stop "$kind are missing: $names; install the packages that hold them (Debian calls them $packages)"
    fi
    if [[ $(id -u) != 0 ]]; then
        stop "$kind are missing: $names; type this line, then try again: sudo apt-get install --yes $packages"
    fi
    say "installing the system packages $packages"
    # shellcheck disable=SC2086  # a list of package names
    if ! { apt-get update -qq && DEBIAN_FRONTEND=noninteractive apt-get install -qq --yes --no-install-recommends $packages; } >/dev/null 2>&1; then
        stop "could not install them; type this line to see why: apt-get update && apt-get install --yes $packages"
    fi
    missing=$("$@" | cut -d' ' -f1 | paste -sd' ')
    [[ -z $missing ]] || stop "$kind are still missing after that: $missing"
}

# What an environment depends on, as one line: it is made anew or completed when this changes.
# $1: interpreter, $2: file of pins, $3: "run" or "test".
stamp_text() {
    "$1" - "$repository" "$2" "$3" <<'PYTHON'
import hashlib
import pathlib
import sys

repository, pins, purpose = sys.argv[1:]
parts = [sys.version, repository, purpose, pathlib.Path(repository, "pyproject.toml").read_text(), pathlib.Path(pins).read_text()]
print(hashlib.sha256("\0".join(parts).encode()).hexdigest())
PYTHON
}

# Pins every dependency of pyproject.toml at its lower bound: $1: interpreter, $2: file to write.
write_lowest_pins() {
    "$1" - "$repository/pyproject.toml" >"$2" <<'PYTHON'
import sys
import tomllib

with open(sys.argv[1], "rb") as file:
    project = tomllib.load(file)["project"]
for requirement in project["dependencies"] + project["optional-dependencies"]["test"]:
    print(requirement.replace(">=", "=="))
PYTHON
}

# pip with its output kept back unless it fails, when its last lines tell why.
install_quietly() {
    local log
    log=$(mktemp)
    if ! "$python" -m pip install --quiet --disable-pip-version-check --no-input "$@" >"$log" 2>&1; then
        tail -n 5 -- "$log" >&2
        rm -f -- "$log"
        stop "could not install the Python packages (the lines above are pip's); is there a network?"
    fi
    rm -f -- "$log"
}

# Makes or completes the environment. "test" adds what the checks need; "lowest" takes the lower bounds of
# pyproject.toml instead of constraints.txt, in an environment of its own.
prepare_environment() {
    local purpose=run lowest="" pins="$repository/constraints.txt" target="$repository" system_python stamp word
    for word in "$@"; do
        case $word in
            test) purpose=test target="$repository[test]" ;;
            lowest) lowest=yes environment="$repository/.venv-lowest" python="$environment/bin/python" ;;
            *) stop "prepare_environment does not know '$word'" ;;
        esac
    done
    system_python=$(find_python)
    require "system libraries" missing_libraries "$system_python"
    [[ $purpose == run ]] || require "programs for the checks" missing_programs
    # Two scripts started at once must not make the same environment at once.
    if command -v flock >/dev/null; then
        exec 9<"$repository/pyproject.toml"
        flock 9
    fi
    if [[ -n $lowest ]]; then
        pins=$(mktemp)
        write_lowest_pins "$system_python" "$pins"
    fi

    stamp=$(stamp_text "$system_python" "$pins" "$purpose")
    if ! { [[ -x $python ]] && grep -qxF -- "$stamp" "$environment/stamps" 2>/dev/null; }; then
        if [[ -e $environment/stamps ]] && "$python" -m pip --version >/dev/null 2>&1; then
            say "completing the Python environment $(basename -- "$environment")"
        else
            say "making the Python environment $(basename -- "$environment") (once; about 300 MB are fetched)"
            "$system_python" -c 'import ensurepip, venv' 2>/dev/null ||
                stop "Python's venv module is missing; type this line, then try again: sudo apt-get install --yes python3-venv"
            "$system_python" -m venv --clear -- "$environment" >/dev/null || stop "could not make $environment"
        fi
        : >"$environment/stamps"
        install_quietly --constraint "$repository/constraints.txt" setuptools
        install_quietly --constraint "$pins" --no-build-isolation --editable "$target"
        printf '%s\n' "$stamp" "$(stamp_text "$system_python" "$pins" run)" >"$environment/stamps"
    fi
    [[ -z $lowest ]] || rm -f -- "$pins"
    if command -v flock >/dev/null; then
        exec 9<&-
    fi
}
