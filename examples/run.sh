#!/bin/sh
# A tour of seqmix on the log of a bottling line. Needs `seqmix` in PATH; runs from any directory, writes no file.
set -eu
cd "$(dirname "$0")"

show() {
    printf '\n== %s\n' "$1"
}

show "What the log holds, and how it was read"
seqmix describe line.csv --format table

show "What comes next: the odds of the next five rows, and the weight of every model"
seqmix forecast line.csv --column state --quiet --format table

show "Three ways in which the next twelve rows may go"
seqmix forecast line.csv --column state --quiet --format table --steps 12 --paths 3

show "What such odds were worth on the last fifth of the log, each row predicted before it was read"
seqmix score line.csv --column state --last 20% --quiet --format table

show "Which models explain three weeks of it, looked at once a minute"
seqmix weights weeks.csv.gz --column state --quiet --format table

show "The rows of the last day that came as the greatest surprise: row, time, state, bits"
seqmix score weeks.csv.gz --column state --from 2026-03-20T00:00:00 --per-row --quiet --format csv | awk -F, 'NR == 1 || $4 > 9'

show "In a pipe: the most probable state of each of the next five minutes"
gzip -dc weeks.csv.gz | seqmix forecast - --column state --quiet --format jsonl |
    sed 's/.*"time": "\([^"]*\)".*"top": "\([^"]*\)".*/\1 \2/'

show "Alarm codes, one a line: the next one, and the odds of one never seen before (no state)"
tail -n 300 alarms.txt | seqmix forecast --steps 1 --format csv --quiet
