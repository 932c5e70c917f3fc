#!/bin/sh
# Carries out one visit: an example to be filled in, named in night.toml as
#
#   [push]
#   command = ["/etc/nightwright/carry-out.sh"]
#
# CAUTION. This script is where the telescope moves. nightwright chooses observations; it does not
# protect people, the dome or the optics. Rain, wind, sun and motion interlocks are the observatory's
# own, in hardware, tested by qualified people, and they win. Telescope and dome move without
# warning: lock them out before anybody goes near. Let qualified people try every line of this with
# the optics covered, and local rules come first.
#
# What comes in: the visit as one line of JSON. What goes out: the outcome as JSON on standard
# output, and nothing else there; whatever goes to standard error is logged. When the visit must
# end (a hold, or too much time), the script and all that it started get SIGTERM, and SIGKILL when
# push.grace_s is over. It must therefore bring the instrument to a safe stop within that time, and
# the observatory must be safe even when it cannot.
#
# As it stands it refuses every visit. With --pretend it moves nothing and waits for as long as the
# exposures would take, which lets a night be tried on a desk.

set -u

IFS= read -r visit || visit=""

# A text or a number of the visit by its key. Enough for the plain keys used here; the keys "epoch",
# "ra_deg" and the like stand within "star".
text() { printf '%s\n' "$visit" | sed -n "s/.*\"$1\":\"\([^\"]*\)\".*/\1/p"; }
number() { printf '%s\n' "$visit" | sed -n "s/.*\"$1\":\(-\{0,1\}[0-9][0-9.eE+-]*\).*/\1/p"; }
now() { date -u +%Y-%m-%dT%H:%M:%SZ; }
say() { printf '%s\n' "$*" >&2; }

answer() { # outcome, further keys
    printf '{"outcome":"%s"%s}\n' "$1" "${2:-}"
    exit 0
}

gathered=0
began=""

# What was gathered until now counts; what was not, does not.
stopped() {
    # Close the shutter and stop the instrument here.
    say "asked to stop after $gathered s"
    if [ "$gathered" -gt 0 ]; then
        answer short ",\"exposing_start\":\"$began\",\"exposing_end\":\"$(now)\",\"exposed_s\":$gathered"
    fi
    answer lost ',"cause":"other","note":"stopped before anything was gathered"'
}
trap stopped TERM INT

name=$(text subject)
count=$(number exposure_count)
seconds=$(number exposure_s)
say "visit $(text visit): $name, $count exposures of $seconds s"

if [ "${1:-}" != "--pretend" ]; then
    answer refused ',"note":"carry-out.sh is not filled in for this observatory"'
fi

# Here: point at the star (number ra_deg, number dec_deg, number epoch), put it on the fibre, and
# answer lost with cause "acquisition" when it is not found.

began=$(now)
exposure=0
while [ "$exposure" -lt "${count:-0}" ]; do
    exposure=$((exposure + 1))
    # Here: one exposure. `sleep` in the background and `wait`, so that the trap is heard at once.
    sleep "$seconds" &
    wait $!
    gathered=$((gathered + ${seconds%.*}))
done

answer done ",\"exposing_start\":\"$began\",\"exposing_end\":\"$(now)\",\"exposed_s\":$gathered"
