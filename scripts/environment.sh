# Finds the environment in which the scripts run, and has it made on first use.
#
# Sourced by the scripts beside it, which put their own full path, free of links, into `here`. Sets `checkout` and
# `python`; `ready LEVEL` returns once the packages listed in scripts/requirements/LEVEL.txt are installed. The usual
# case costs one comparison of two files.

checkout=${here%/scripts/*}
python=$checkout/.venv/bin/python

# Packages of another Python, set for other programs, must not reach this one.
unset PYTHONHOME PYTHONPATH

ready() {
    local level=$1
    if [[ -x $python ]] && cmp -s "$checkout/.venv/$level.txt" "$checkout/scripts/requirements/$level.txt"; then
        return
    fi
    local maker
    maker=$(_find_python) || exit 2
    "$maker" -I "$checkout/scripts/prepare.py" "$level" >&2 || exit $?
}

# Prints the first Python that is new enough, by preference one that can make a virtual environment.
_find_python() {
    local name fit='' found=''
    for name in python3 python3.14 python3.13 python3.12 python3.11 python3.15 python; do
        command -v "$name" >/dev/null || continue
        if "$name" -I -c 'import sys; sys.exit(sys.version_info < (3, 11))' 2>/dev/null; then
            fit=${fit:-$name}
            if "$name" -I -c 'import venv; from ensurepip import bootstrap' 2>/dev/null; then
                echo "$name"
                return
            fi
        else
            found="$found${found:+, }$name is $("$name" --version 2>&1 | head -n 1)"
        fi
    done
    if [[ -n $fit ]]; then # prepare.py says what this one lacks
        echo "$fit"
        return
    fi
    {
        echo "markov needs Python 3.11 or newer, under the name python3 or python3.11 and up on PATH."
        echo "Found: ${found:-no Python at all}."
        echo "On Debian or Ubuntu: sudo apt install python3 python3-venv"
    } >&2
    return 1
}
