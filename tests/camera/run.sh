#!/bin/bash
# Runs `readout live` on a real camera driver, fed by a software camera with known truth.
# See README.md beside this file.
#
#   VMCAM=path/to/vmcam [PYTHON=python3] tests/camera/run.sh [GREY|YUYV]
set -euo pipefail

VMCAM=${VMCAM:?set VMCAM to the folder with vmcam.sh and uvcsim.py}
PYTHON=${PYTHON:-python3}
FORMAT=${1:-YUYV}
here=$(cd "$(dirname "$0")" && pwd)
repository=$(cd "$here/../.." && pwd)
export VMCAM_PIP=${VMCAM_PIP:-"numpy scipy opencv-python-headless fastapi uvicorn websockets pydantic typer rich platformdirs"}

share=$(mktemp -d)
trap 'rm -rf "$share"' EXIT
cp -r "$repository/readout" "$share/readout"
cp "$here"/*.py "$VMCAM/uvcsim.py" "$share/"
PYTHONPATH=$repository "$PYTHON" "$here/make_scene.py" "$share"

# The emulated processor has a wrong AVX2 gather: numpy's sorting by it crashes. Real ones are fine.
status=0
bash "$VMCAM/vmcam.sh" run -k -M "vhci_hcd uvcvideo" -d "$share" -m 1536 -t 600 \
  "export PYTHONDONTWRITEBYTECODE=1 NPY_DISABLE_CPU_FEATURES='X86_V3 X86_V4'; python check_live.py $FORMAT" 2> "$share/console" || status=$?
if [ "$status" != 0 ]; then
  echo "--- the guest's console, last lines"
  grep -v 'vhci_hcd: \(unlink\|urb\)' "$share/console" | tail -n 40
fi
exit "$status"
