#!/usr/bin/env bash
# SPDX-License-Identifier: MIT
# The daemon run from a plain shell, with no systemd about: from a file renamed in to the hook, words, reload, signals,
# kill -9, and what it would have told a service manager. Needs no root; works in a folder of its own, which is removed.
#     tests/fault/plain_shell.sh          builds build/release first; FOREWATER_BUILD=DIR takes another build
set -uo pipefail
here=$(cd "$(dirname "$0")" && pwd)
# shellcheck source=tests/fault/assertions.sh
. "$here/assertions.sh"
cd "$here/../.." || exit 1

build=${FOREWATER_BUILD-}
if [ -z "$build" ]; then
    build=build/release
    { cmake --preset release && cmake --build --preset release --target forewater; } >/dev/null || exit 1
fi
forewater=$(realpath "$build/forewater")
place=$(mktemp -d) || exit 1
tidy() {
    local process
    for process in "${daemon-}" "${listener-}"; do
        [ -z "$process" ] || kill -KILL "$process" 2>/dev/null
    done
    wait 2>/dev/null
    rm -rf "$place"
}
trap tidy EXIT
trap 'exit 130' INT TERM HUP

cat >"$place/hook" <<HOOK
#!/bin/sh
cat >> $place/told
HOOK
chmod +x "$place/hook"
sed "s#/var/lib/forewater#$place/state#; s#/var/spool/forewater#$place/spool#; s#/etc/forewater/hooks/page#$place/hook#" \
    config/forewater.json >"$place/forewater.json"
"${CC:-cc}" -std=c17 -D_GNU_SOURCE -o "$place/notify_listener" tests/fault/notify_listener.c || exit 1

"$place/notify_listener" "$place/notify" >"$place/notified" &
listener=$!
within 5 test -S "$place/notify"

run() { # environment...: starts the daemon
    env "$@" "$forewater" run --config "$place/forewater.json" 2>>"$place/log" &
    daemon=$!
}
store() { # SQL
    sqlite3 -readonly "$place/state/history.db" "$1"
}
picture() { # JSON path into the newest recorded picture
    store "SELECT json_extract(payload, '$1') FROM ledger_payload ORDER BY entry DESC LIMIT 1"
}
notified() {
    cat "$place/notified"
}
log() {
    cat "$place/log"
}
say() {
    "$forewater" say --config "$place/forewater.json" "$@"
}
deliver() { # file name, what rising_stage wants
    local folder=$place/spool/incoming/orlin-scar name=$1
    shift
    rising_stage "$@" >"$folder/.$name" && mv "$folder/.$name" "$folder/$name.csv"
}
how_it_ends() { # signal: sends it; sets exit_code and took_ms
    local from
    from=$(milliseconds)
    kill "-$1" "$daemon"
    exit_code=0
    wait "$daemon" || exit_code=$?
    took_ms=$(($(milliseconds) - from))
    daemon=
}
said_times() { # what, how often at least
    [ "$(grep -c "^$1\$" "$place/notified")" -ge "$2" ] || { notified; return 1; }
}

started=$(milliseconds)
run NOTIFY_SOCKET="$place/notify" WATCHDOG_USEC=600000
check "it says READY" within 10 says '^READY=1$' notified
echo "        READY $(($(milliseconds) - started)) ms after the start"
check "it says what it watches" says '^STATUS=watching 1 gauges? for 3 crossings?' notified
check "it feeds the watchdog, more than once" within 5 said_times WATCHDOG=1 3
check "a file is renamed in" deliver first 0.90 0.20 12
check "its readings are stored" within 10 is 12 store 'SELECT count(*) FROM reading'
check "a decision is made" within 5 says '^(SEND|LATE)$' picture '$.points[0].advice'
check "the hook has it on stdin" within 10 says '"kind":"decision"' cat "$place/told"
check "a word is said" says '^recorded: ' say road tallowick-ford "CREW CALLED" --by "duty officer"
check "and is in the picture" within 5 is "CREW CALLED" picture '$.points[0].road.state'
check "the picture can be seen" says '^ACT BY' "$forewater" status --config "$place/forewater.json"
check "a second instance is refused, by number" \
    says "another instance \\(pid $daemon\\) holds the store" "$forewater" run --config "$place/forewater.json"
check "with exit code 75" exits_with 75 "$forewater" run --config "$place/forewater.json"

digest=$(picture '$.settings')
cp "$place/forewater.json" "$place/good.json"
sed -i '0,/"night_min": 55/s//"night_min": 85/; 0,/"day_min": 40/s//"day_min": 70/' "$place/forewater.json"
kill -HUP "$daemon"
check "SIGHUP: it says RELOADING" within 10 said_times RELOADING=1 1
check "and READY again" within 10 said_times READY=1 2
check "the changed configuration is in force" within 5 says_not "^$digest\$" picture '$.settings'
sed -i '0,/"slope": 0.0024/s//"slope": "steep"/' "$place/forewater.json"
kill -HUP "$daemon"
check "a bad one is named with its line" within 5 says 'forewater.json:[0-9]+: reaches.*slope' log
check "and the old one stays in force" within 5 says 'the old one stays in force' log
cp "$place/good.json" "$place/forewater.json"

told=$(grep -c . "$place/told")
kill -KILL "$daemon"
wait "$daemon" 2>/dev/null
: >"$place/notified"
check "after kill -9 a word waits" exits_with 69 say note "waiting" --by "duty officer"
run NOTIFY_SOCKET="$place/notify"
check "started again, it is READY" within 10 says '^READY=1$' notified
check "the readings are there" is 12 store 'SELECT count(*) FROM reading'
check "the word that waited is taken" within 5 is waiting store "SELECT text FROM word WHERE kind = 'note'"
check "no watchdog is fed when none watches" says_not WATCHDOG notified
check "what was said before is there" is "CREW CALLED" picture '$.points[0].road.state'
sleep 0.5
check "nobody is told the same again" is "$told" grep -c . "$place/told"
how_it_ends TERM
check "SIGTERM ends it with 0" [ $exit_code -eq 0 ]
check "within a second" [ $took_ms -lt 1000 ]
echo "        ended in $took_ms ms"
check "it says STOPPING" says '^STOPPING=1$' notified

: >"$place/notified"
run NOTIFY_SOCKET="$place/notify"
check "it starts once more" within 10 says '^READY=1$' notified
how_it_ends INT
check "Ctrl-C ends it with 0" [ $exit_code -eq 0 ]
check "within a second" [ $took_ms -lt 1000 ]
echo "        ended in $took_ms ms"
check "one cycle and then the end: --once" "$forewater" run --once --config "$place/forewater.json"
check "the store is whole" is ok store 'PRAGMA integrity_check'

[ "$assertions_failed" -eq 0 ] || { echo; echo "The last it said:"; tail -n 40 "$place/log"; }
assertions_end
