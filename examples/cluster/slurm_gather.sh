#!/bin/bash
# Merge when all tasks have ended:  sbatch --dependency=afterany:ARRAY slurm_gather.sh map map.nc
#
# "afterany", as a failed task would keep "afterok" waiting for ever; points that are missing are told, and are the exit code 1.
#SBATCH --time=00:30:00
#SBATCH --mem=1G

exec scatterpump gather "$1" --output "$2"
