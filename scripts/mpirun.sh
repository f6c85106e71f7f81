#!/bin/sh
# Runs a program on some ranks of this machine, also where ranks outnumber cores, as root, and in containers.
#
#   scripts/mpirun.sh RANKS PROGRAM [ARGUMENT]...
#
# MPIRUN names another mpirun. The settings are for Open MPI 4 and 5; other libraries do not look at them.
set -eu
ranks=$1
shift
export OMPI_ALLOW_RUN_AS_ROOT=1 OMPI_ALLOW_RUN_AS_ROOT_CONFIRM=1
export OMPI_MCA_rmaps_base_oversubscribe=1 PRTE_MCA_rmaps_default_mapping_policy=:oversubscribe
# Runs side by side would otherwise all be bound to the first cores.
export OMPI_MCA_hwloc_base_binding_policy=none PRTE_MCA_hwloc_default_binding_policy=none
# Containers forbid one process to read another's memory.
export OMPI_MCA_btl_vader_single_copy_mechanism=none
export OMPI_MCA_btl_base_warn_component_unused=0
exec "${MPIRUN:-mpirun}" -n "$ranks" "$@"
