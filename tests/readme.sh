#!/usr/bin/env bash
# Runs the README's first command, as it is written there, in a fresh copy of the project's files: a newcomer's set-up.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."
bash tests/needs.sh
begun=$SECONDS
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
mkdir "$work/copy" "$work/home"
git ls-files -z | tar --null --files-from=- --create --file=- | tar --extract --file=- --directory="$work/copy"
awk '/^```/ { if (inside) exit; inside = ($0 == "```sh"); next } inside' README.md >"$work/command"
grep -q 'pulsewright burn' "$work/command" || { echo "README.md: its first block burns nothing" >&2; exit 1; }
cd "$work/copy"
unset PYTHONPATH VIRTUAL_ENV
# Records go to a home of their own; HOME itself stays, pip may need its settings.
export XDG_DATA_HOME=$work/home XDG_STATE_HOME=$work/home PIP_DISABLE_PIP_VERSION_CHECK=1
bash -euo pipefail "$work/command" </dev/null
echo "README's first command: $((SECONDS - begun)) s"
