#!/bin/sh
# A tour of seqmix on the logs of a small dairy. Needs `seqmix` and `python3` in PATH; runs from any directory, leaves no file.
set -eu
cd "$(dirname "$0")"
kept=$(mktemp -d)
trap 'rm -r "$kept"' EXIT
trap 'exit 130' INT
trap 'exit 143' TERM

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

show "Numbers: the temperature of the milk tank, every ten minutes"
seqmix describe tank.csv --format table

show "The next hour, with the evening milk coming in: does it get warmer than 5 degrees, at least once?"
seqmix forecast tank.csv --steps 6 --above 5.0 --quiet --format table

show "What such ranges were worth on the last two days"
seqmix score tank.csv --last 288 --quiet --format table

show "Crates shipped a day: the next two weeks"
seqmix forecast crates.csv --steps 14 --quiet --format table

show "How good forecasts are up to a week ahead"
seqmix score crates.csv --steps 7 --quiet --format table

show "Three ways in which the next week may go"
seqmix forecast crates.csv --steps 7 --paths 3 --quiet --format table

show "The tank is cleaned: which of the last eight runs does today's look like?"
seqmix alike runs/day-*.txt --to runs/today.txt --quiet --format table

show "Cups on a belt, by a packing list that slips now and then: with time to spare, a compressor finds the place best"
seqmix weights belt.txt --compressor-share 0.9 --quiet --format table

show "What the tank's log taught is kept, by two models that answer soon"
seqmix learn tank.csv --into "$kept/tank.state" --models autoregression,values --quiet --format table

show "The days after it, row by row as they come: a stuck probe comes free, a failing valve springs open"
head -n 700 faults.csv |
    seqmix follow --state "$kept/tank.state" --false-alarms 1/week --quiet --format jsonl | python3 raise.py

show "Events of three weeks of the bottling line: rows that were improbable when they came"
seqmix surprise weeks.csv.gz --column state --quiet --format table

show "The line changes over to bigger bottles: from which row on?"
seqmix shifts recipe.csv --odds 1000 --quiet --format table
