#!/usr/bin/env bash
# Whole fits of this project beside R's StructTS and statsmodels, measured in one run on one core.
#
#     tests/side_by_side/run.sh
#
# Installs both by package where they are missing: R's base by apt-get (as root), statsmodels by pip into a virtual environment
# in a temporary folder. Neither is needed for anything else.
set -euo pipefail
here=$(cd "$(dirname "$0")" && pwd)

if ! command -v Rscript > /dev/null; then
    apt-get install -y --no-install-recommends r-base-core
fi
python=${STILLWELL_PYTHON:-}
if [ -z "$python" ]; then
    folder=${TMPDIR:-/tmp}/stillwell-side-by-side
    [ -x "$folder/bin/python" ] || python3 -m venv "$folder"
    "$folder/bin/python" -c 'import statsmodels' 2> /dev/null || "$folder/bin/pip" install --quiet statsmodels
    python=$folder/bin/python
fi
# One thread each: the linear algebra libraries below numpy and R would start more.
export STILLWELL_PYTHON=$python OMP_NUM_THREADS=1 OPENBLAS_NUM_THREADS=1 MKL_NUM_THREADS=1
cd "$here/../.."
cargo bench -p stillwell-statespace --bench side_by_side
