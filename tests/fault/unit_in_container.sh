#!/usr/bin/env bash
# SPDX-License-Identifier: MIT
# The unit as it is installed, under a booted systemd: a container over an overlay of this machine's root, which is
# gone afterwards. Shows that the daemon does its work inside its sandbox, and who may do what around it.
#     tests/fault/unit_in_container.sh          builds build/release first; FOREWATER_BUILD=DIR takes another build
# Needs root, systemd-nspawn, overlayfs and sqlite3; ends with 77 where there is none. Nothing outside is changed:
# mounts and processes live in namespaces of their own, which the kernel clears away even if this is killed.
set -uo pipefail
here=$(cd "$(dirname "$0")" && pwd)
root_of_tree=$(cd "$here/../.." && pwd)
# shellcheck source=tests/fault/assertions.sh
. "$here/assertions.sh"

skip() {
    echo "SKIPPED: tests/fault/unit_in_container.sh: $1"
    exit 77
}

[ "$(id -u)" -eq 0 ] || skip "it needs root"
for tool in systemd-nspawn nsenter unshare setpriv sqlite3 cmake; do
    command -v $tool >/dev/null || skip "$tool is not installed (systemd-container, util-linux, sqlite3, cmake)"
done

if [ -z "${FOREWATER_IN_OWN_NAMESPACE-}" ]; then
    unshare --mount --pid --fork --mount-proc true 2>/dev/null || skip "namespaces cannot be made here"
    exec env FOREWATER_IN_OWN_NAMESPACE=yes unshare --mount --pid --fork --kill-child --mount-proc \
        --propagation private bash "$here/$(basename "$0")" "$@"
fi

cd "$root_of_tree" || exit 1
build=${FOREWATER_BUILD-}
if [ -z "$build" ]; then
    build=build/release
    { cmake --preset release && cmake --build --preset release --target forewater; } >/dev/null || exit 1
fi

# --- the container ------------------------------------------------------------------------------------------------
place=$(mktemp -d) || exit 1
tidy() {
    [ -z "${nspawn-}" ] || { kill -KILL "$nspawn" && wait "$nspawn"; } 2>/dev/null
    umount -lR "$place" 2>/dev/null
    rmdir "$place"
}
trap tidy EXIT
trap 'exit 130' INT TERM HUP

mount -t tmpfs -o size=512m,mode=0755 tmpfs "$place" || skip "no tmpfs can be mounted"
mkdir "$place"/{upper,work,root}
mount -t overlay -o "lowerdir=/,upperdir=$place/upper,workdir=$place/work" overlay "$place/root" ||
    skip "no overlay of / can be mounted"
box=$place/root

# As the operator's manual says, with nothing of this machine's own services beside it
rm -rf "$box"/etc/systemd/system/*.wants "$box"/etc/systemd/system/default.target "$box"/var/log/journal \
    "$box"/etc/forewater "$box"/var/lib/forewater "$box"/var/spool/forewater
cat >"$box/etc/systemd/system/forewater-trial.target" <<'UNIT'
[Unit]
Description=As little as is needed around the unit under trial
Requires=basic.target
After=basic.target
AllowIsolate=yes
UNIT
DESTDIR=$box cmake --install "$build" --prefix /usr >"$place/install.log" || { cat "$place/install.log"; exit 1; }

# it keeps a folder per container there: not in this machine's /run
mkdir -p /run/systemd/nspawn
mount -t tmpfs tmpfs /run/systemd/nspawn || skip "no tmpfs can be mounted"
systemd-nspawn -q -D "$box" --private-network --register=no --keep-unit --resolv-conf=off --timezone=off \
    --console=read-only -b systemd.unit=forewater-trial.target >"$place/console.log" 2>&1 &
nspawn=$!

find_init() { # the process that is number 1 in the innermost of its namespaces
    local status
    for status in /proc/[0-9]*/status; do
        if grep -qE '^NSpid:\s.*\s1$' "$status" 2>/dev/null; then
            init=${status#/proc/}
            init=${init%/status}
            return 0
        fi
    done
    return 1
}
in_box() {
    nsenter -t "$init" -m -u -i -n -p -C -- "$@"
}
as() { # user, shell text: with that user's groups, and a umask that leaves nothing to others
    local user=$1
    shift
    in_box setpriv --reuid "$user" --regid "$user" --init-groups sh -c "umask 077; $1"
}
has_booted() {
    find_init && in_box systemctl is-active -q forewater-trial.target
}
if ! within 60 has_booted >/dev/null; then
    cat "$place/console.log"
    skip "the container does not boot here"
fi
find_init

property() {
    in_box systemctl show --value -p "$1" forewater
}
journal() {
    in_box journalctl -u forewater -o cat --no-pager
}
store() { # SQL
    in_box sqlite3 -readonly /var/lib/forewater/history.db "$1"
}
picture() { # JSON path into the newest recorded picture
    store "SELECT json_extract(payload, '$1') FROM ledger_payload ORDER BY entry DESC LIMIT 1"
}
is_active() {
    in_box systemctl is-active -q forewater
}

# --- installing, as docs/operating.md says ------------------------------------------------------------------------
check "sysusers makes the daemon's user and the two groups" in_box systemd-sysusers
check "tmpfiles makes the folders" in_box systemd-tmpfiles --create forewater.conf
manual=yes
in_box sh -c "command -v man >/dev/null" || manual=no
check "the unit verifies" is "" in_box systemd-analyze --man=$manual verify forewater.service
check "exposure is 1.1 or less" in_box systemd-analyze security --threshold=11 forewater.service
in_box systemd-analyze security --no-pager forewater.service | tail -n 1 | sed 's/^/        /'
in_box sh -c 'cp /usr/share/forewater/forewater.json /etc/forewater/ && cp /usr/share/forewater/hooks/page /etc/forewater/hooks/'
for user in modem duty stranger; do
    in_box useradd --user-group --no-create-home "$user"
done
in_box usermod -aG forewater-feed modem
in_box usermod -aG forewater-duty duty
check "the example configuration passes 'forewater check'" in_box forewater check

# --- start, reading, decision, hook -------------------------------------------------------------------------------
started=$(milliseconds)
check "it starts and says READY" in_box systemctl enable --now --quiet forewater
echo "        READY $(($(milliseconds) - started)) ms after systemctl start"
pid=$(property MainPID)
pid=$(property MainPID)
check "it runs as _forewater, in the group of the people on duty" says '^_forewater +forewater-duty$' \
    in_box ps -o user:32=,group:32= -p "$pid" --no-headers
check "it has no capability" says '^CapEff:\s+0000000000000000$' in_box cat "/proc/$pid/status"
check "it can gain no privilege, and its system calls are filtered" \
    is $'NoNewPrivs:\t1\nSeccomp:\t2' in_box grep -E '^(NoNewPrivs|Seccomp):' "/proc/$pid/status"
check "the watchdog watches" is 1min property WatchdogUSec
check "the feed's folder is open to who delivers readings" \
    is "_forewater:forewater-feed drwxrws---" in_box stat -c '%U:%G %A' /var/spool/forewater/incoming/orlin-scar

deliver() { # file name, what rising_stage wants: as a modem's script would, renamed in
    local folder=/var/spool/forewater/incoming/orlin-scar name=$1
    shift
    rising_stage "$@" | as modem "cat > $folder/.$name && mv $folder/.$name $folder/$name.csv"
}
dropped=$(milliseconds)
check "who is in forewater-feed delivers a file, whatever the umask" deliver first 0.90 0.20 12
check "its readings are stored" within 10 is 12 store 'SELECT count(*) FROM reading'
check "the file moves to done/" within 5 in_box test -f /var/spool/forewater/incoming/orlin-scar/done/first.csv
check "a decision is made" within 5 says '^(SEND|LATE)$' picture '$.points[0].advice'
check "the hook of the example has passed the decision on" within 10 \
    says '"kind":"decision"' in_box cat /var/lib/forewater/told/duty-officer.jsonl
echo "        decision passed on $(($(milliseconds) - dropped)) ms after the file was written"
told() {
    in_box grep -c '"kind":"decision"' /var/lib/forewater/told/duty-officer.jsonl
}

# --- who may do what ----------------------------------------------------------------------------------------------
check "who is in forewater-duty says a word, whatever the umask" \
    says '^recorded: ' as duty 'forewater say road tallowick-ford "CREW CALLED" --by "duty officer"'
check "the word is in the picture" within 5 is "CREW CALLED" picture '$.points[0].road.state'
check "who is in forewater-duty sees the picture" says '^ACT BY' as duty 'forewater status'
check "who is in forewater-duty reads the record" \
    is 12 as duty "sqlite3 -readonly /var/lib/forewater/history.db 'SELECT count(*) FROM reading'"
check "who is in forewater-duty cannot change it" \
    fails as duty "sqlite3 /var/lib/forewater/history.db 'DELETE FROM reading'"
check "root may say a word" says '^recorded: ' in_box sh -c 'umask 077; forewater say note "wind" --by "IT caretaker"'
check "a stranger may not say a word" fails as stranger 'forewater say note "x" --by stranger'
check "a stranger may not see the picture" fails as stranger 'forewater status'
check "a stranger may not deliver readings" \
    fails as stranger 'touch /var/spool/forewater/incoming/orlin-scar/x.csv'
check "who delivers readings may not say a word" fails as modem 'forewater say note "x" --by modem'
check "a second instance is refused" exits_with 75 in_box timeout 10 forewater run

# --- backup, as docs/operating.md says ------------------------------------------------------------------------------
check "a backup can be made while it runs" in_box sqlite3 -readonly /var/lib/forewater/history.db '.backup /root/b.db'
check "by people on duty too" \
    as duty "sqlite3 -readonly /var/lib/forewater/history.db '.backup /tmp/b.db' && test -s /tmp/b.db"
check "it is whole and holds the readings" is $'ok\n12' \
    in_box sqlite3 /root/b.db 'PRAGMA integrity_check; SELECT count(*) FROM reading'

# --- reload -------------------------------------------------------------------------------------------------------
digest=$(picture '$.settings')
act_by=$(picture '$.points[0].act_by')
in_box sed -i '0,/"night_min": 55/s//"night_min": 85/; 0,/"day_min": 40/s//"day_min": 70/' /etc/forewater/forewater.json
check "systemctl reload" in_box systemctl reload forewater
check "the changed configuration is in force" within 10 says_not "^$digest\$" picture '$.settings'
check "act-by has moved with it" within 5 says_not "^$act_by\$" picture '$.points[0].act_by'
digest=$(picture '$.settings')
in_box cp /etc/forewater/forewater.json /etc/forewater/good.json
in_box sed -i '0,/"slope": 0.0024/s//"slope": "steep"/' /etc/forewater/forewater.json
in_box systemctl reload forewater
check "a bad configuration is named with its line" within 10 says 'forewater.json:[0-9]+: reaches.*slope' journal
check "and the old one stays in force" says 'the old one stays in force' journal
check "with the unit active" is active property ActiveState
check "the settings are the old ones" is "$digest" picture '$.settings'

# --- restarts -----------------------------------------------------------------------------------------------------
restarted_since() {
    [ "$(property NRestarts)" -gt "$1" ] && is_active
}
told_before=$(told)
pid=$(property MainPID)
killed=$(milliseconds)
in_box kill -KILL "$pid"
check "kill -9: systemd starts it again" within 15 restarted_since 0
echo "        READY again $(($(milliseconds) - killed)) ms after kill -9, RestartSec=5 of it"
check "with a bad file, on the last good settings, and says so" \
    within 5 says 'CANNOT BE USED.*last good settings' journal
check "the readings are there" is 12 store 'SELECT count(*) FROM reading'
check "the words are there" is "CREW CALLED" picture '$.points[0].road.state'
check "nobody is told the same again" is "$told_before" told
in_box cp /etc/forewater/good.json /etc/forewater/forewater.json
in_box systemctl reload forewater
check "the mended file is taken" within 10 says 'configuration [0-9a-f]+ is in force' journal
stopping=$(milliseconds)
in_box systemctl stop forewater
took=$(($(milliseconds) - stopping))
check "systemctl stop ends within a second" [ $took -lt 1000 ]
echo "        stopped in $took ms"
check "it ended by itself, with success" is success property Result
check "what it said shows no refused call" says_not 'Operation not permitted|Permission denied|Read-only file' journal

in_box sqlite3 -readonly /var/lib/forewater/history.db 'SELECT count(*) FROM reading' >/dev/null
in_box systemctl start forewater
check "a look by root while it is stopped does no harm" is_active
in_box systemctl stop forewater
in_box sh -c 'cd /var/lib/forewater && mv history.db aside.db && { [ ! -e history.db-wal ] || mv history.db-wal aside.db-wal; }'
in_box install -o _forewater -g forewater-duty -m 0640 /root/b.db /var/lib/forewater/history.db
in_box systemctl start forewater
check "it goes on from a backup" within 5 says '^[1-9]' store 'SELECT count(*) FROM ledger WHERE utc >= unixepoch() - 5'
check "with the readings of the backup" is 12 store 'SELECT count(*) FROM reading'
in_box systemctl stop forewater
check "and ends well" is success property Result

# --- the sandbox, from inside a hook ------------------------------------------------------------------------------
# A denied system call now kills; the hook is one that tries what it must not be able to do
in_box sh -c 'echo secret > /etc/forewater/credentials/gateway && chmod 600 /etc/forewater/credentials/gateway'
in_box mkdir -p /etc/systemd/system/forewater.service.d
in_box tee /etc/systemd/system/forewater.service.d/trial.conf >/dev/null <<'UNIT'
[Service]
SystemCallErrorNumber=kill
LoadCredential=gateway:/etc/forewater/credentials/gateway
WatchdogSec=3
RestartSec=1
UNIT
in_box tee /etc/forewater/hooks/page >/dev/null <<'HOOK'
#!/bin/sh
exec >>/var/lib/forewater/tried 2>/dev/null
may() { if sh -c "$2"; then echo "may $1"; else echo "may not $1"; fi; }
cat > /dev/null
may 'write its state' 'echo x > /var/lib/forewater/x'
may 'write its runtime folder' 'echo x > /run/forewater/x'
may 'write a temporary file' 'echo x > /tmp/x'
may 'write the configuration' 'echo x >> /etc/forewater/forewater.json'
may 'write a hook' 'echo x > /etc/forewater/hooks/x'
may 'read a credential it was given' 'grep -q secret /run/credentials/forewater.service/gateway'
may 'read the credential folder' 'ls /etc/forewater/credentials/'
may 'see a home' 'ls /home/* /root/*'
for folder in /var/lib/forewater /run/forewater /var/spool/forewater/inbox /tmp /var/tmp /dev/shm; do
    may "run what it wrote in $folder" "cp /usr/bin/true $folder/.t && $folder/.t"
done
may 'see another process' 'test -d /proc/1'
may 'run awk' 'awk "BEGIN { exit }"'
may 'run curl' 'curl --version'
may 'run sqlite3' 'sqlite3 :memory: "SELECT 1"'
echo end
HOOK
in_box systemctl daemon-reload
in_box sh -c 'sed -i "0,/\"night_min\": 85/s//\"night_min\": 55/; 0,/\"day_min\": 70/s//\"day_min\": 40/" /etc/forewater/forewater.json'
# the gauge's web page of the example, served by the container's own systemd
in_box tee /run/serve >/dev/null <<'SERVE'
while read -r line && [ "${#line}" -gt 1 ]; do :; done # the request, to its empty line
printf 'HTTP/1.1 200 OK\r\nContent-Type: application/json\r\nConnection: close\r\n\r\n'
printf '{"data":[{"t":"%s","v":0.91}]}\n' "$(date -u -d '-5 hours' +%Y-%m-%dT%H:%M:%SZ)"
SERVE
in_box tee /run/systemd/system/page.socket >/dev/null <<'UNIT'
[Socket]
ListenStream=127.0.0.1:8480
Accept=yes
UNIT
in_box tee /run/systemd/system/page@.service >/dev/null <<'UNIT'
[Service]
ExecStart=/bin/sh /run/serve
StandardInput=socket
UNIT
in_box systemctl daemon-reload
in_box systemctl start page.socket
check "it starts where a denied system call kills" in_box systemctl start forewater
check "and reads the gauge's web page" within 15 is 0.91 store 'SELECT value FROM reading WHERE source = 1'
check "and takes a file" deliver second 3.40 0.40 1
check "whose reading is stored" within 10 is 13 store 'SELECT count(*) FROM reading WHERE source = 0'
check "and takes words, which make a decision: KEEP SHUT" \
    says '^recorded: ' as duty 'forewater say road tallowick-ford SHUT --both-sides --by "roads foreman"'
check "the decision is made there" within 5 is "KEEP SHUT" picture '$.points[0].advice'
check "and starts hooks there" within 15 says '^end$' in_box cat /var/lib/forewater/tried
tried() {
    in_box cat /var/lib/forewater/tried
}
for what in 'write its state' 'write its runtime folder' 'write a temporary file' 'read a credential it was given' \
    'run awk' 'run curl' 'run sqlite3'; do
    check "a hook may $what" says "^may $what\$" tried
done
for what in 'write the configuration' 'write a hook' 'read the credential folder' 'see a home' \
    'run what it wrote in /var/lib/forewater' 'run what it wrote in /run/forewater' 'run what it wrote in /tmp' \
    'run what it wrote in /var/tmp' 'run what it wrote in /dev/shm' 'run what it wrote in /var/spool/forewater/inbox' \
    'see another process'; do
    check "a hook may not $what" says "^may not $what\$" tried
done
check "no call of the daemon was denied: it was not killed" is 0 property NRestarts
check "nor one of the hook" says_not 'signal 31|SIGSYS' journal

# --- watchdog -----------------------------------------------------------------------------------------------------
pid=$(property MainPID)
stopped=$(milliseconds)
in_box kill -STOP "$pid"
check "a daemon that hangs is ended by the watchdog and started again" within 30 restarted_since 0
echo "        READY again $(($(milliseconds) - stopped)) ms after it was stopped, WatchdogSec=3"
check "by the watchdog and nothing else" says 'Watchdog timeout' journal
check "what was said before is there" is SHUT picture '$.points[0].road.state'
check "it stops" in_box systemctl stop forewater

[ "$assertions_failed" -eq 0 ] || { echo; echo "The last the unit said:"; journal | tail -n 60; }
assertions_end
