#!/bin/bash
# SPDX-License-Identifier: MIT
# Holds the decisions of one store against those of another: the live run of the demonstration against its replay.
#
#     compare.sh LIVE.db REPLAY.db [MINUTES]
#
# A decision is a change of level or of the BLIND overlay at a crossing; of several within one minute the last one
# counts. Both stores must hold the same decisions in the same order. A decision may differ by MINUTES (2 unless said
# otherwise) in when it came, and its act-by by 5 minutes. Prints one line per decision; fails when the stores part.
set -euo pipefail

act_by_minutes=5

if [ $# -lt 2 ] || [ $# -gt 3 ]; then
    echo "usage: compare.sh LIVE.db REPLAY.db [MINUTES]" >&2
    exit 64
fi
live=$1 replay=$2 minutes=${3:-2}
for store in "$live" "$replay"; do
    if [ ! -f "$store" ]; then
        echo "compare.sh: $store: no such store" >&2
        exit 66
    fi
done

# point|minute|level|blind|act-by (minutes since 1970; empty: none), in the order of point and time
decisions() {
    sqlite3 -readonly -batch -separator '|' "$1" "
        WITH state AS (
            SELECT a.point, l.utc / 60 AS minute, a.level, a.is_blind, a.act_by / 60 AS act_by,
                   row_number() OVER (PARTITION BY a.point, l.utc / 60 ORDER BY a.entry DESC) AS newest
            FROM advice a JOIN ledger l USING (entry)),
        turn AS (
            SELECT *, lag(level) OVER past AS was, lag(is_blind) OVER past AS was_blind
            FROM state WHERE newest = 1
            WINDOW past AS (PARTITION BY point ORDER BY minute))
        SELECT point, minute, level, is_blind, act_by FROM turn
        WHERE was IS NULL OR was <> level OR was_blind <> is_blind
        ORDER BY point, minute;"
}

work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
decisions "$live" >"$work/live"
decisions "$replay" >"$work/replay"
if [ ! -s "$work/live" ] || [ ! -s "$work/replay" ]; then
    echo "compare.sh: a store without a decision: nothing can be compared" >&2
    exit 65
fi

# place|point|minute|level|blind|act-by: numbered per crossing, so that one decision too many is seen where it is
number() {
    awk -F'|' -v OFS='|' '{ place[$1]++; print $1 "#" sprintf("%03d", place[$1]), $0 }' "$1" | LC_ALL=C sort
}
number "$work/live" >"$work/live.numbered"
number "$work/replay" >"$work/replay.numbered"

columns=0,1.3,1.4,1.5,1.6,2.3,2.4,2.5,2.6
LC_ALL=C join -t'|' -a1 -a2 -e '?' -o "$columns" "$work/live.numbered" "$work/replay.numbered" |
    awk -F'|' -v minutes="$minutes" -v act_by_minutes="$act_by_minutes" '
        function clock(minute) { # UTC+1, the district
            return minute == "?" ? "  -  " : sprintf("%02d:%02d", int((minute + 60) / 60) % 24, minute % 60)
        }
        function apart(a, b) { return a > b ? a - b : b - a }
        function words(level, blind) { return level == "?" ? "-" : level (blind == 1 ? " BLIND" : "") }
        BEGIN { printf "%-22s %-7s %-18s %-7s %-18s\n", "crossing", "live", "", "replay", "" }
        {
            split($1, place, "#")
            fault = ""
            if ($2 == "?" || $6 == "?") fault = "in one store alone"
            else if ($3 != $7 || $4 != $8) fault = "another decision"
            else if (apart($2, $6) > minutes) fault = apart($2, $6) " min apart"
            else if (($5 == "?") != ($9 == "?")) fault = "act-by in one store alone"
            else if ($5 != "?" && apart($5, $9) > act_by_minutes) fault = "act-by " apart($5, $9) " min apart"
            faults += fault != ""
            printf "%-22s %-7s %-18s %-7s %-18s %s\n", place[1], clock($2), words($3, $4),
                clock($6), words($7, $8), fault
        }
        END {
            if (faults > 0) { printf "live and replay PART in %d of %d decisions\n", faults, NR; exit 1 }
            printf "live and replay agree in all %d decisions (within %d min; act-by within %d min)\n", NR, minutes,
                act_by_minutes
        }'
