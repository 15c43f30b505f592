#!/usr/bin/env bash
# All runs of a study as an array of Slurm jobs, then the table and the diagram as a last one.
#
#   tools/cluster/slurm_array.sh STUDY.toml DIR [options of sbatch]
#   tools/cluster/slurm_array.sh study.toml /scratch/study-scan --time=4:00:00 --partition=long
#
# STUDY and DIR must be on a file system that all nodes see. Submitting again goes on with what is missing. The program
# is `pellicle` on the path, or $PELLICLE. Before its time is up a task gets SIGTERM and writes a checkpoint; give
# --requeue to have it taken up again.
set -euo pipefail

if [[ $# -lt 2 ]]; then
    sed -n '2,8p' "$0" | cut -c3- >&2
    exit 2
fi
study=$(realpath "$1")
folder=$(realpath -m "$2")
shift 2
program=$(command -v "${PELLICLE:-pellicle}")

mkdir -p "$folder/runs" "$folder/slurm"
"$program" scan "$study" --out "$folder" --list | awk -F'\t' 'NR > 1 && $2 != "ended" { print $1 }' > "$folder/slurm/ids"
count=$(wc -l < "$folder/slurm/ids")
after=()
if [[ $count -gt 0 ]]; then
    # SLURM_ARRAY_TASK_ID counts from 1, like lines.
    array=$(sbatch --parsable --job-name=pellicle --array="1-$count" --ntasks=1 --cpus-per-task=1 --signal=TERM@60 \
        --output="$folder/slurm/%A_%a.out" "$@" <<EOF
#!/usr/bin/env bash
exec srun --quiet "$program" scan "$study" --out "$folder" --quiet --only "\$(sed -n "\${SLURM_ARRAY_TASK_ID}p" "$folder/slurm/ids")"
EOF
    )
    after=(--dependency="afterany:$array")
    echo "array $array: $count runs"
fi
# Failed runs are in the table, too: whatever the tasks came to, it is made.
last=$(sbatch --parsable --job-name=pellicle-gather "${after[@]}" --ntasks=1 --output="$folder/slurm/%j.out" <<EOF
#!/usr/bin/env bash
exec "$program" scan "$study" --out "$folder" --gather
EOF
)
echo "job $last: table and diagram in $folder"
