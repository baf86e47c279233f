#!/bin/sh
# The demo case: made quietly, made once, and shown as text where there is no terminal; and the live
# demo as far as it goes without one.
cd "$(dirname "$0")/../.." || exit 2
say() { # status, what
    if [ "$1" -eq 0 ]; then echo "ok $2"; else echo "not ok $2"; fi
}
into=$(mktemp -d)/demo
case=$into/S-204.case
trap 'rm -rf "${into%/demo}"' EXIT
talk=$(demo/prepare "$into" 2>&1) && [ -z "$talk" ] && [ -f "$case" ]
say $? 'the demo case is made, and nothing is said'
build/incisura mark "$case" note --at 09:20:00 --note kept --rater KM >/dev/null 2>&1
talk=$(demo/prepare "$into" 2>&1) && [ -z "$talk" ] && build/incisura marks "$case" --csv | grep -q kept
say $? 'a second time it is left as it is, with the marks put in since'
shown=$(demo/open "$into" </dev/null 2>&1)
say $? 'it opens without a terminal'
for word in 'ECG II' ABP EDA incision 'build/incisura review'; do
    echo "$shown" | grep -q "$word"
    say $? "shown as text, it holds: $word"
done
into=$into-live
told=$(demo/live "$into" </dev/null 2>&1) && [ -f "$into/S-204.case" ] && [ -p "$into/monitor" ]
say $? 'the live demo makes a fresh case and a FIFO'
for word in "build/theatre --play fifo:$into/monitor" "build/incisura live $into/S-204.case"; do
    echo "$told" | grep -qF "$word"
    say $? "and without a terminal says what to type: ${word%%"$into"*}"
done
