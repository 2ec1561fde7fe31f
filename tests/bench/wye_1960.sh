#!/usr/bin/env bash
# SPDX-License-Identifier: MIT
# Routes the published flood of December 1960 on the River Wye with `forewater route` and prints how near it comes to the
# observed outflow, for the stated configuration (tests/data/route/wye1960.json) and for one change of it at a time.
#     tests/bench/wye_1960.sh            all lines
#     FOREWATER=PATH tests/bench/wye_1960.sh
set -euo pipefail
cd "$(dirname "$0")/../.."
forewater=${FOREWATER:-build/release/forewater}
config=tests/data/route/wye1960.json
record=tests/reference/flood_wye1960.csv
work=$(mktemp -d)
trap 'rm -r "$work"' EXIT

awk -F, 'BEGIN { print "time,discharge_m3s" } !/^#/ && $1 != "t_h" { print 3600 * $1 "," $2 }' "$record" >"$work/inflow.csv"

changed() { # a number in the configuration for another: key, old, new; reads and writes $work/config.json
    grep -q "\"$1\": $2\\b" "$work/config.json" || { echo "wye_1960.sh: no \"$1\": $2 in $config" >&2; exit 1; }
    sed -i "s/\"$1\": $2\\b/\"$1\": $3/" "$work/config.json"
}

figures() { # name, then options for route
    local name=$1
    shift
    "$forewater" route --config "$work/config.json" --inflow "erwood=$work/inflow.csv" --step 300 --every 300 "$@" >"$work/out.csv"
    # Nash-Sutcliffe over the 34 observed values; volumes of both by the trapezoidal rule over the same 6 h
    awk -F, -v name="$name" '
        NR == FNR { if (!/^#/ && $1 != "t_h") { at[n++] = 3600 * $1; observed[3600 * $1] = $3; sum += $3 } next }
        FNR == 1 { for (i = 1; i <= NF; i++) if ($i == "belmont.discharge_m3s") column = i; next }
        { if ($column > peak) { peak = $column; time = $1 / 3600 } computed[$1] = $column }
        END {
            for (i = 0; i < n; i++) {
                missed += (computed[at[i]] - observed[at[i]]) ^ 2
                spread += (observed[at[i]] - sum / n) ^ 2
                weight = i == 0 || i == n - 1 ? 0.5 : 1
                seen += weight * observed[at[i]]; made += weight * computed[at[i]]
            }
            printf "%-44s %6.0f %8.1f %8.3f %8.3f\n", name, peak, time, 1 - missed / spread, made / seen
        }' "$record" "$work/out.csv"
}

variant() { # name, then groups of key, old, new
    local name=$1
    shift
    cp "$config" "$work/config.json"
    while [ $# -gt 0 ]; do
        changed "$1" "$2" "$3"
        shift 3
    done
    figures "$name"
}

printf '%-44s %6s %8s %8s %8s\n' 'outflow at Belmont' 'peak' 'at' 'Nash-' 'volume by'
printf '%-44s %6s %8s %8s %8s\n' '' 'm3/s' 'h' 'Sutcl.' 'observed'
printf '%-44s %6.0f %8.1f\n' 'observed' 969 102
variant 'as stated (muskingum-cunge)'
figures 'as stated, kinematic' --method kinematic
figures 'as stated, kinematic-linear' --method kinematic-linear
variant 'both roughnesses -20 %' n 0.038 0.0304 n 0.060 0.048
variant 'both roughnesses +20 %' n 0.038 0.0456 n 0.060 0.072
variant 'slope -20 %' slope 0.00093 0.000744
variant 'slope +20 %' slope 0.00093 0.001116
variant 'plain half as wide' width_m 500 250
variant 'plain twice as wide' width_m 500 1000
variant 'no plain: all in the channel' above_m 3.5 50
variant 'no side inflow' share 0.077 0.0
