#!/bin/bash
# Hands a night to Slurm, from the folder of pipeline.yaml: the shards, and what ends the night after them,
# whatever became of them. Options are handed on to the array, such as --array=0-15 for sixteen shards.
set -euo pipefail
here=$(dirname "$(readlink -f "$0")")
shards=$(sbatch --parsable "$@" "$here/bake_shard.sbatch")
sbatch --parsable --dependency="afterany:$shards" "$here/bake_finish.sbatch"
