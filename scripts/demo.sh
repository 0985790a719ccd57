#!/usr/bin/env bash
# Installs what is missing, builds aureole, predicts the halo of an invented edge-on galaxy and draws it.
set -euo pipefail
# shellcheck source=scripts/setup.sh
source "$(dirname "$0")/setup.sh"
results=${1:-$project/demo_output}
install_packages run
build OFF aureole
"$build_folder/aureole" predict "$project/config_demo/edge_on_disc.toml" -o "$results" --force
/usr/bin/python3 "$project/scripts/figures.py" "$results" >/dev/null
echo
echo "Look at the pictures of this invented galaxy (model output, no real object):"
for figure in radio_maps gamma_maps profiles gamma_profiles heights spectrum; do
    echo "  $results/figures/$figure.png"
done
echo "Maps: $results/maps, tables: $results/tables."
