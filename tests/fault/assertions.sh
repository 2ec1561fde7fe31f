# SPDX-License-Identifier: MIT
# shellcheck shell=bash
# One line per assertion, for the scripts beside this file. Each sources it and ends with assertions_end.
assertions_passed=0
assertions_failed=0

# check WHAT-IS-TRUE COMMAND...: prints it; when the command fails, what it said too
check() {
    local what=$1 said
    shift
    if said=$("$@" 2>&1); then
        assertions_passed=$((assertions_passed + 1))
        printf 'ok      %s\n' "$what"
    else
        assertions_failed=$((assertions_failed + 1))
        printf 'FAILED  %s\n' "$what"
        printf '%s\n' "$said" | tail -n 20 | sed 's/^/        | /'
    fi
}

# within SECONDS COMMAND...: true as soon as the command is; what it said last when it never is
within() {
    local until=$((SECONDS + $1)) said
    shift
    while ! said=$("$@" 2>&1); do
        if [ $SECONDS -ge "$until" ]; then
            printf '%s\n' "$said"
            return 1
        fi
        sleep 0.1
    done
}

# is EXPECTED COMMAND...: what the command prints is exactly that
is() {
    local expected=$1 got
    shift
    got=$("$@" 2>&1)
    [ "$got" = "$expected" ] || { printf 'expected: %s\ngot: %s\n' "$expected" "$got"; return 1; }
}

# says PATTERN COMMAND...: what the command prints has a line that matches (extended regular expression)
says() {
    local pattern=$1 got
    shift
    got=$("$@" 2>&1)
    grep -qE -- "$pattern" <<<"$got" || { printf 'expected a line like: %s\ngot: %s\n' "$pattern" "$got"; return 1; }
}

says_not() {
    local pattern=$1 got
    shift
    got=$("$@" 2>&1)
    if grep -E -- "$pattern" <<<"$got"; then return 1; fi
}

fails() {
    if "$@"; then
        echo "it succeeded"
        return 1
    fi
}

# exits_with CODE COMMAND...
exits_with() {
    local code=$1 got=0
    shift
    "$@" || got=$?
    [ "$got" -eq "$code" ] || { echo "exit code $got, expected $code"; return 1; }
}

milliseconds() {
    echo $(($(date +%s%N) / 1000000))
}

# rising_stage FROM_M RISE_M COUNT: a drop file's text, one reading every 15 min, the newest a minute ago
rising_stage() {
    local count=$3 now index
    now=$(date +%s)
    echo time,stage_m
    for ((index = 1; index <= count; index++)); do
        printf '%s,%s\n' "$(date -u -d "@$((now - 60 - (count - index) * 900))" +%Y-%m-%dT%H:%M:%SZ)" \
            "$(awk -v from="$1" -v rise="$2" -v index_="$index" 'BEGIN { printf "%.2f", from + rise * index_ }')"
    done
}

assertions_end() {
    echo
    echo "$assertions_passed passed, $assertions_failed failed"
    [ "$assertions_failed" -eq 0 ]
}
