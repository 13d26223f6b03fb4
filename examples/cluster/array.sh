#!/bin/sh
# One file of [exchange] as an array job: every task answers its share of the asked points, the last step joins the shares.
#
#   evenpoise tune exchange.toml                                   ends with exit status 4: exchange.run/asked/0001.csv
#   sbatch --array=0-19 array.sh exchange.run/asked/0001.csv 20    or any scheduler that numbers its tasks; or by hand:
#   for k in 0 1 2; do sh array.sh exchange.run/asked/0001.csv 3 $k & done; wait
#   sh array.sh exchange.run/asked/0001.csv 20 join                exchange.run/answered/0001.csv
#   evenpoise tune exchange.toml --resume                          goes on, until it asks again or is done
#
# The task's number is the third argument, or what the scheduler sets.
set -eu
asked=$1
tasks=$2
task=${3:-${SLURM_ARRAY_TASK_ID:-${PBS_ARRAY_INDEX:-0}}}
model=${MODEL:-"python3 $(dirname "$0")/../tank/tank.py"}
answered=$(dirname "$asked")/../answered/$(basename "$asked")
shares=$answered.shares
mkdir -p "$shares"

if [ "$task" = join ]; then
    [ "$(ls "$shares" | wc -l)" -eq "$tasks" ] || { echo "$shares: not all $tasks shares are there yet" >&2; exit 1; }
    { echo "id,level"; cat "$shares"/*; } > "$answered.partial"
    mv "$answered.partial" "$answered"
    rm -r "$shares"
    exit 0
fi

# Every tasks-th row: the ids on one side, the values on the other (the model reads a point a line, separated by spaces).
rows=$shares/.rows.$task
awk -F, -v n="$tasks" -v k="$task" 'NR > 1 && (NR - 2) % n == k' "$asked" > "$rows"
cut -d, -f2- "$rows" | tr ',' ' ' | $model > "$rows.levels"
cut -d, -f1 "$rows" | paste -d, - "$rows.levels" > "$shares/.part.$task"
mv "$shares/.part.$task" "$shares/$task"
rm "$rows" "$rows.levels"
