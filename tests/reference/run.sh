#!/bin/sh
# Recomputes the outside numbers with pinned versions and holds them against the stored ones.
# Exit 0: all agree, or SciPy cannot be installed here (said so). Exit 1: a script disagrees.
# REFERENCE_VENV names the virtual environment to make or to use again; default: a temporary one.
set -u
here=$(cd "$(dirname "$0")" && pwd)
skip() { echo "reference scripts skipped: SciPy cannot be installed here"; exit 0; }

python=${PYTHON:-python3}
command -v "$python" >/dev/null 2>&1 || skip
if [ -n "${REFERENCE_VENV:-}" ]; then
    place=$REFERENCE_VENV
else
    place=$(mktemp -d) || skip
    trap 'rm -rf "$place"' EXIT
fi
if ! "$place/bin/python" -c 'import scipy' >/dev/null 2>&1; then
    "$python" -m venv "$place" >/dev/null 2>&1 || skip
fi
"$place/bin/python" -m pip install --quiet --disable-pip-version-check \
    --requirement "$here/requirements.txt" >/dev/null 2>&1 || skip

PYTHONDONTWRITEBYTECODE=1
export PYTHONDONTWRITEBYTECODE
failed=0
for script in "$here"/*.py; do
    grep -q -e '"--check"' -e "'--check'" "$script" || continue
    "$place/bin/python" "$script" --check || { echo "reference script failed: $(basename "$script")"; failed=1; }
done
exit $failed
