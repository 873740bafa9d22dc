#!/usr/bin/env bash
# Sets up what the tests need in .venv (or in $IONWITNESS_VENV) and runs all of them: style, types, tests.
set -euo pipefail
cd "$(dirname "$0")/.."
venv="${IONWITNESS_VENV:-.venv}"

if [ ! -x "$venv/bin/python" ]; then
  python3 -m venv "$venv"
fi
"$venv/bin/python" -m pip install --quiet --disable-pip-version-check --editable '.[test,workbench,sign]'

# The browser tests drive Debian's Chromium. Without it, and without the right to install it, they say so and skip.
if ! command -v chromium >/dev/null 2>&1 && [ "$(id -u)" = 0 ] && command -v apt-get >/dev/null 2>&1; then
  apt-get update -qq && DEBIAN_FRONTEND=noninteractive apt-get install -y -qq chromium >/dev/null
fi

export OMP_NUM_THREADS=1
"$venv/bin/ruff" check .
"$venv/bin/ruff" format --check --quiet .
"$venv/bin/mypy"
"$venv/bin/python" -m pytest --numprocesses "${IONWITNESS_TEST_WORKERS:-2}" --dist loadgroup -m "not long" "$@"
