#!/bin/sh
# Makes the virtual environment, or says what is missing for it.
set -eu
python=$1
venv=$2

if [ -z "$python" ]; then
	echo "Python 3.11 is not installed. Install it: apt-get install python3.11 python3.11-venv" >&2
	exit 2
fi
if ! "$python" -c 'import sys; sys.exit(sys.version_info < (3, 11))'; then
	echo "$python is older than Python 3.11. Install it (apt-get install python3.11 python3.11-venv) or name a newer one: make run PYTHON=..." >&2
	exit 2
fi
if ! "$python" -c 'import venv, ensurepip' 2>/dev/null; then
	echo "Python's venv module is not installed. Install it: apt-get install python3-venv" >&2
	exit 2
fi
# An environment that works is kept: only its stamp was missing.
if [ -x "$venv/bin/python" ] && "$venv/bin/python" -m pip --version >/dev/null 2>&1; then
	exit 0
fi
"$python" -m venv --clear "$venv"
