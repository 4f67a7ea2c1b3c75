#!/bin/bash
# A sweep on the ranks of MPI:  mpi.sh 64 map.toml map      (within a job:  mpi.sh $SLURM_NTASKS map.toml map)
#
# The first rank hands out the batches and writes them, the others work. MPI ends all ranks when one dies; what is written is
# safe, and the same command does the rest. To end it early and in order, send USR1 to mpiexec.
# Where the cluster wants "srun" instead of "mpiexec -n", set LAUNCH="srun -n".

ranks=$1 plan=$2 results=$3

# One thread a rank. With more, the ranks of a node get in each other's way.
export OMP_NUM_THREADS=1 OPENBLAS_NUM_THREADS=1 MKL_NUM_THREADS=1 SCOTCH_PTHREAD_NUMBER=1

exec ${LAUNCH:-mpiexec -n} "$ranks" scatterpump sweep "$plan" --into "$results" --executor mpi
