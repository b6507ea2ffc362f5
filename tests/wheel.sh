#!/usr/bin/env bash
# A user's way: build the wheel, install it with the system's own Python into a bare environment, and from another folder
# list the definitions and burn the sample image on the virtual rig. Prints what it did; any failure ends it non-zero.
set -euo pipefail
cd "$(dirname "${BASH_SOURCE[0]}")/.."
root=$PWD
bash tests/needs.sh
begun=$SECONDS
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
unset PYTHONPATH VIRTUAL_ENV
export PIP_DISABLE_PIP_VERSION_CHECK=1
mkdir -p "$work/home" "$work/elsewhere"

/usr/bin/python3 -m venv "$work/env"
"$work/env/bin/pip" wheel --quiet --no-deps --wheel-dir "$work" "$root"
"$work/env/bin/pip" install --quiet "$work"/pulsewright-*.whl

# Nothing that git knows under these two folders may be missing from the wheel, whatever the kind of file.
"$work/env/bin/python" - "$work"/pulsewright-*.whl <<'PYTHON'
import subprocess
import sys
import zipfile

listed = subprocess.run(["git", "ls-files", "host/pulsewright", "chipdefs"], capture_output=True, text=True, check=True)
wanted = {name.removeprefix("host/") if name.startswith("host/") else f"pulsewright/{name}" for name in listed.stdout.split()}
missing = sorted(wanted - set(zipfile.ZipFile(sys.argv[1]).namelist()))
if missing or not any(name.startswith("pulsewright/chipdefs/") for name in wanted):
    sys.exit(f"missing from the wheel: {missing or 'chipdefs'}")
print(f"the wheel carries all {len(wanted)} files")
PYTHON

cd "$work/elsewhere"
export HOME=$work/home # records go there; pip above may need the real one's settings
unset XDG_DATA_HOME XDG_CONFIG_HOME XDG_STATE_HOME XDG_CACHE_HOME
found=$("$work/env/bin/python" -c 'from pulsewright.chip.shipped import shipped_folder; print(shipped_folder())')
case $found in
    "$work"/env/*) ;;
    *) echo "definitions come from $found, not from the wheel" >&2; exit 1 ;;
esac
"$work/env/bin/pulsewright" chips
"$work/env/bin/pulsewright" burn 27e512 "$root/samples/chime-tower/chime.hex" --rig virtual --erase
echo "wheel: $((SECONDS - begun)) s"
