#!/usr/bin/env bash
# From a clone to pictures and a verdict. Uses sample_wedge/ only; writes to pictures/.
set -euo pipefail
source "$(dirname "${BASH_SOURCE[0]}")/environment.sh"
ensure_environment standalone
fieldviz=.venv/bin/fieldviz
mkdir -p pictures

echo
echo "== What is in a snapshot =="
"$fieldviz" inspect sample_wedge/saltmarsh_002.h5

echo
echo "== Pictures =="
for scene in flux-sheets outflow current-sheet azimuth-cut mirror-check; do
    "$fieldviz" render sample_wedge/saltmarsh_002.h5 --scene "$scene" -o "pictures/$scene-dark.png"
done
for scene in flux-sheets mirror-check; do
    "$fieldviz" render sample_wedge/saltmarsh_002.h5 --scene "$scene" --theme light \
        -o "pictures/$scene-light.png"
done
"$fieldviz" render sample_wedge/two_levels.h5 --scene flux-sheets -o pictures/two-levels.png

echo
echo "== Field lines =="
"$fieldviz" lines sample_wedge/saltmarsh_002.h5 --seeds equal-flux --count 200 \
    -o pictures/lines.vtp

echo
echo "== Report =="
"$fieldviz" report "sample_wedge/saltmarsh_*.h5" -o pictures/report

echo
echo "== Verdict =="
"$fieldviz" symmetry "sample_wedge/saltmarsh_*.h5" >pictures/verdict.txt
head -n 1 pictures/verdict.txt

echo
echo "Pictures, lines, the report (report/report.html) and the verdict lie in $(pwd)/pictures:"
ls pictures
