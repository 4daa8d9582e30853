#!/bin/sh
# The demo behind `make demo`: undertag's main job on an invented stream, with a crash in its middle.
# Usage: sh tests/demo/demo.sh BUILD      (BUILD: the folder with undertagd and undertag)
#
# Everything happens in a temporary home and on a socket of its own, and is removed at the end; only
# the report stays, in BUILD.
set -eu

shown=${1:?usage: demo.sh BUILD}
build=$(cd "$shown" && pwd)
here=$(cd "$(dirname "$0")" && pwd)
python=${PYTHON:-/usr/bin/python3}
entries=3000
first_part=2000 # filed in peace; the crash falls into the rest
bite=20         # lines of the rest at a time, so that the crash finds the filing in its middle
crash_after=250 # entries of the rest that are in the store
sample=200      # entries whose proposals are compared with the truth
checks=100      # entries that are checked
report=$shown/demo-report.html

tab=$(printf '\t')
start=$PWD
work=$(mktemp -d "${TMPDIR:-/tmp}/undertag-demo.XXXXXX")
socket=$work/socket
daemon='' filing='' feeder=''

# --- saying and failing ---------------------------------------------------------------------------

strong='' plain=''
if [ -t 1 ] && [ -z "${NO_COLOR:-}" ] && [ "${TERM:-dumb}" != dumb ]; then
    strong=$(printf '\033[1m') plain=$(printf '\033[0m')
fi

heading() {
    printf '\n%s%s%s\n' "$strong" "$1" "$plain"
}

say() {
    printf '%s\n' "$*" | fmt -w 78 -g 78
}

# A whole number with a comma before each three digits.
count() {
    printf '%s' "$1" | sed -e ':more' -e 's/^\([0-9]*[0-9]\)\([0-9]\{3\}\)/\1,\2/' -e 't more'
}

fail() {
    printf '\nundertag demo: %s\n' "$*" >&2
    if [ -s "$work/daemon.log" ]; then
        echo "The daemon's last words:" >&2
        tail -n 5 "$work/daemon.log" >&2
    fi
    exit 1
}

# A process that nobody has waited for yet is a zombie, and has ended all the same.
ended() {
    ! grep -qs '^State:[[:space:]]*[^Z[:space:]]' "/proc/$1/status"
}

clean_up() {
    status=$?
    trap - EXIT
    for process in $feeder $filing $daemon; do
        kill "$process" 2>/dev/null || true # it may have ended already
        tries=250
        until ended "$process"; do
            tries=$((tries - 1))
            [ $tries -gt 0 ] || kill -9 "$process" 2>/dev/null || true
            sleep 0.02
        done
    done
    rm -rf "$work"
    exit "$status"
}
trap clean_up EXIT
trap 'exit 130' INT
trap 'exit 143' TERM HUP

# --- the programs ---------------------------------------------------------------------------------

undertag() {
    "$build/undertag" --socket "$socket" "$@"
}

tally() {
    "$python" "$here/tally.py" "$@"
}

# Shows a command as a person would type it, and runs it.
show() {
    printf '%s$ undertag' "$strong"
    for word in "$@"; do
        case $word in
        *' '*) printf " '%s'" "$word" ;;
        *) printf ' %s' "$word" ;;
        esac
    done
    printf '%s\n' "$plain"
    undertag "$@" || fail "'undertag $*' ended with $?"
}

# A number out of the daemon's state; fails where there is no answer.
state() {
    answer=$(undertag --json state) && printf '%s' "$answer" | tally member "$1"
}

# wait_until SECONDS WHAT COMMAND...: until the command succeeds, and no longer.
wait_until() {
    last=$(($(date +%s) + $1))
    what=$2
    shift 2
    until "$@"; do
        [ "$(date +%s)" -le "$last" ] || fail "waited in vain for $what"
        sleep 0.02
    done
}

accepts() {
    ! ended "$daemon" || fail "the daemon ended by itself"
    undertag state >/dev/null 2>&1
}

# ids FROM TO: of these lines of the stream.
ids() {
    sed -n "$1,$2s/^{\"id\": \"\([^\"]*\)\".*/\1/p" logbooks.jsonl
}

# A file in small bites, as a live feed sends it. Ends early when nobody reads any more.
trickle() {
    at=1
    total=$(wc -l <"$1")
    while [ $at -le "$total" ] && sed -n "$at,$((at + bite - 1))p" "$1"; do
        at=$((at + bite))
        sleep 0.02
    done
}

holds_items() {
    items=$(state items) && [ "$items" -ge "$1" ]
}

has_learned_all() {
    seq=$(state seq) && learned=$(state learned) && [ "$learned" -eq "$seq" ]
}

start_daemon() {
    "$build/undertagd" --home "$work/home" --socket "$socket" 2>>"$work/daemon.log" &
    daemon=$!
    wait_until 20 "the daemon to answer" accepts
}

# --- the demo -------------------------------------------------------------------------------------

for program in undertagd undertag; do
    [ -x "$build/$program" ] || fail "$build/$program is not there; run 'make' first"
done
cd "$work"

heading "1. A stream of tagged documents"
"$python" "$here/logbooks.py" --entries $entries --out logbooks.jsonl --truth truth.jsonl ||
    fail "the logbooks could not be made"
head -n $first_part logbooks.jsonl >part1.jsonl
tail -n +$((first_part + 1)) logbooks.jsonl >part2.jsonl
rest=$((entries - first_part))
say "$(count $entries) entries from the logbooks of a trust of lighthouses and harbours that" \
    "never was. Its keepers tagged them and forgot many tags, rare ones most often." \
    "A daemon starts in an empty home and takes $(count $first_part) of them. Each is on disk" \
    "before it is acknowledged, and the daemon learns from it at once."
start_daemon
show file part1.jsonl
wait_until 60 "the daemon to learn what was filed" has_learned_all

heading "2. What does a filed entry lack?"
example=$(ids $((first_part - 1)) $((first_part - 1)))
tally entry logbooks.jsonl "$example" || fail "$example is not in the stream"
show gaps "$example" --most 1 --why </dev/null
tally forgotten truth.jsonl "$example" || fail "$example is not in the truth"
say "The chance is the probability that the tag belongs there although it was not" \
    "given. Below it: the words that speak for it. For a draft, that it belongs:"
cat >draft <<'END'
Thick weather from the south-east since noon and the siren going all the
while. Two in bed with the influenza; the doctor could not land.
END
sed 's/^/  /' draft
show gaps --most 3 <draft

heading "3. A crash"
mkfifo pipe
undertag --json file <pipe >acknowledged 2>filing.log &
filing=$!
trickle part2.jsonl >pipe 2>/dev/null &
feeder=$!
wait_until 60 "the filing to be under way" holds_items $((first_part + crash_after))
kill -9 "$daemon"
wait "$daemon" 2>/dev/null || true # what it ended with is the kill
daemon=
wait "$feeder" || true # the pipe has broken under it
feeder=
if wait "$filing"; then
    fail "the filing ended well although its daemon was killed"
fi
filing=
acknowledged=$(grep -c '"was"' acknowledged) || fail "nothing was acknowledged before the crash"
[ "$acknowledged" -lt "$rest" ] || fail "the crash came too late"
start_daemon
kept=$(($(state items) - first_part))
undertag --json list --most $entries >list.json || fail "'undertag list' ended with $?"
lost=$(tally lost logbooks.jsonl $((first_part + acknowledged)) <list.json)
say "While the other $(count $rest) are filed, the daemon is killed with -9, which it can" \
    "neither foresee nor catch. $(count "$acknowledged") had been acknowledged; started again, it has" \
    "$(count $kept). Of all $(count $((first_part + acknowledged))) that were ever acknowledged," \
    "$lost are lost. The feed is simply run again: what had been filed is 'same'."
[ "$lost" -eq 0 ] || fail "$lost acknowledged entries are lost"
[ "$kept" -ge "$acknowledged" ] || fail "only $kept of $acknowledged entries are there"
show file part2.jsonl
[ "$(state items)" -eq $entries ] || fail "there are $(state items) entries instead of $entries"
wait_until 60 "the daemon to learn what was filed" has_learned_all

heading "4. Are the proposals right?"
say "The generator of the logbooks knows which tags each entry deserves; the daemon" \
    "never sees that. For $sample entries, the three best proposals of each:"
ids 1 $entries | awk -v step=$((entries / sample)) 'NR % step == 0' >sampled
while read -r id; do
    printf '%s\t' "$id"
    undertag --json gaps "$id" --most 3 --floor 0 || exit 1
done <sampled >answers || fail "the daemon did not answer for each of $sample entries"
tally proposals logbooks.jsonl truth.jsonl answers || fail "the proposals could not be counted"

heading "5. How much is missing?"
say "An editor checks $checks entries drawn at random against the whole vocabulary, which" \
    "tells how much this desk forgets. Before, only a published curve did."
undertag --json completeness >before.json || fail "'undertag completeness' ended with $?"
undertag sample $checks --seed 41 >to-check || fail "'undertag sample' ended with $?"
tally check logbooks.jsonl truth.jsonl <to-check >said || fail "the checker has nothing to say"
while IFS= read -r line; do
    IFS=$tab
    set -f # a tag is no pattern
    # shellcheck disable=SC2086 # the words are what it splits into
    set -- $line
    set +f
    unset IFS
    undertag check "$@" --drawn random --checker K. >checked </dev/null ||
        fail "'undertag check $1' ended with $?"
done <said
wait_until 60 "the daemon to learn from the checks" has_learned_all
show completeness --most 2
undertag --json completeness >after.json || fail "'undertag completeness' ended with $?"
say "The share on record as it was said to be, and the true one:"
tally complete logbooks.jsonl truth.jsonl to-check before.json after.json ||
    fail "the shares could not be compared"

heading "6. Where would an editor find most?"
show worklist --most 2 --floor 0.8
undertag --json worklist --most 1 --floor 0.8 >head.json || fail "'undertag worklist' ended with $?"
undertag --json worklist --most 100 >worklist.json || fail "'undertag worklist' ended with $?"
tally promise truth.jsonl <worklist.json || fail "the promise could not be compared"
say "An editor rules on the first two. That takes effect at once, and teaches:"
tally rule truth.jsonl <head.json >ruling || fail "the editor has nothing to say"
set --
while IFS= read -r word; do
    set -- "$@" "$word"
done <ruling
show rule "$@"
say "All of this as one page, which stays:"
cd "$start"
show report "$report"

heading "The end"
kill -TERM "$daemon"
wait_until 20 "the daemon to stop" ended "$daemon"
status=0
wait "$daemon" || status=$?
daemon=
[ "$status" -eq 0 ] || fail "the daemon ended with $status"
cat <<END
The daemon has ended well, and its home is removed. One of your own stays:
  $shown/undertagd --home ~/logbooks --socket ~/logbooks.socket &
  export UNDERTAG_SOCKET=~/logbooks.socket
  $(dirname "$0")/logbooks.py | $shown/undertag file
All the rest: $shown/undertag --help
END
