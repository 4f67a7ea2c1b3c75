#!/bin/bash
# A sweep as a Slurm job array:  sbatch slurm_array.sh map.toml map
#
# Every task does its share of the plan; "scatterpump sweep PLAN --dry-run" tells how many tasks, and how much time and memory.
# A minute before its time is up a task is told so by USR1: it finishes its running batch, writes it, ends with code 75, and is put
# back into the queue. What is done already is never done again, whatever becomes of the tasks and however many there are.
#SBATCH --array=1-16
#SBATCH --cpus-per-task=1
#SBATCH --mem-per-cpu=500M
#SBATCH --time=01:00:00
#SBATCH --signal=B:USR1@60
#SBATCH --requeue
#SBATCH --open-mode=append

plan=$1 results=$2

scatterpump sweep "$plan" --into "$results" &
sweep=$!
trap 'again=yes; kill -USR1 $sweep' USR1       # time is nearly up
trap 'kill -TERM $sweep' TERM                  # cancelled, or put back into the queue by Slurm itself

wait $sweep; code=$?
while kill -0 $sweep 2>/dev/null; do wait $sweep; code=$?; done   # a signal interrupts "wait", not the sweep

# The number of the array and of the task: SLURM_JOB_ID alone can mean the whole array.
if [ $code -eq 75 ] && [ -n "$again" ]; then
    scontrol requeue "${SLURM_ARRAY_JOB_ID}_${SLURM_ARRAY_TASK_ID}"
fi
exit $code
