#!/usr/bin/env bash
# Makes the virtual environment of the reference checks under target/ and prints the path of its Python.
# Nothing is installed again while tests/reference/requirements.txt and the Python version stay the same.
# usage: python=$(bash tests/reference/venv.sh)
set -euo pipefail
cd "$(dirname "$0")/../.."

venv=target/reference-venv
wanted=$( (cat tests/reference/requirements.txt; python3 --version) | sha256sum | cut -d' ' -f1)
if [ ! -x "$venv/bin/python" ] || [ "$(cat "$venv/made-from" 2>/dev/null)" != "$wanted" ]; then
  echo "reference checks: installing pinned libraries into $venv" >&2
  rm -rf "$venv"
  python3 -m venv "$venv"
  "$venv/bin/python" -m pip install --quiet --disable-pip-version-check \
    --requirement tests/reference/requirements.txt >&2
  echo "$wanted" >"$venv/made-from"
fi
echo "$PWD/$venv/bin/python"
