#!/usr/bin/env bash
# A sound card made of software: a private JACK server on its dummy driver with `virtual_preamp` as the only device,
# so that the real PortAudio path runs where there is no sound hardware.
#
#   virtual_sound_card.sh [-r RATE] [-p PERIOD] [-t SECONDS] -d "virtual_preamp OPTIONS" -- COMMAND [ARG...]
#
# COMMAND finds the server through its environment, the device under the name preamp, and in CARD_SERVER_PID and
# CARD_DEVICE_PID whom to stop or end when it plays a fault. Exit status: COMMAND's own; 124 when it took longer
# than SECONDS (90); 125 when the card did not come up. Everything started here is ended here, by process number.
# Needs jackd2, util-linux, coreutils.
set -u

rate=48000 period=1024 seconds=90 device=""
while getopts r:p:t:d: option; do
  case $option in
    r) rate=$OPTARG ;; p) period=$OPTARG ;; t) seconds=$OPTARG ;; d) device=$OPTARG ;; *) exit 125 ;;
  esac
done
shift $((OPTIND - 1))
if [ $# -eq 0 ] || [ -z "$device" ]; then
  sed -n '2,12s/^# \{0,1\}//p' "$0" >&2
  exit 125
fi
for tool in jackd jack_lsp timeout; do
  command -v $tool >/dev/null || { echo "virtual sound card: $tool is missing (docs/install-packages.sh tests)" >&2; exit 125; }
done

# Servers share a register in /dev/shm that holds eight and collides when several start at once: as root each card
# gets a /dev/shm of its own, otherwise they take turns in starting.
if [ -z "${CARD_PRIVATE:-}" ]; then
  if unshare --mount true 2>/dev/null; then
    CARD_PRIVATE=yes exec unshare --mount --propagation private bash "$0" -r "$rate" -p "$period" -t "$seconds" -d "$device" -- "$@"
  fi
  CARD_PRIVATE=no
fi
[ "$CARD_PRIVATE" = yes ] && { mount -t tmpfs -o size=256m,mode=1777 tmpfs /dev/shm || exit 125; }

folder=$(mktemp -d) || exit 125
server="" unit="" command=""
finish() {
  trap - EXIT
  for process in "$command" "$unit" "$server"; do
    [ -n "$process" ] && kill -CONT "$process" 2>/dev/null && kill -TERM "$process" 2>/dev/null
    for _ in 1 2 3 4 5 6 7 8 9 10 11 12 13 14 15 16 17 18 19 20; do
      [ -n "$process" ] && kill -0 "$process" 2>/dev/null && sleep 0.1
    done
    [ -n "$process" ] && kill -KILL "$process" 2>/dev/null
  done
  rm -rf "$folder"
}
trap finish EXIT
trap 'exit 130' INT TERM HUP

# One sound device that cannot be opened keeps PortAudio's ALSA part quiet; no device at all makes it abort.
echo 'pcm.!default { type hw card 99 }' >"$folder/alsa.conf"
export ALSA_CONFIG_PATH=$folder/alsa.conf JACK_DEFAULT_SERVER=coldpin-$$-$RANDOM JACK_NO_START_SERVER=1 JACK_NO_AUDIO_RESERVATION=1
ulimit -l unlimited 2>/dev/null

[ "$CARD_PRIVATE" = no ] && exec 8>"${TMPDIR:-/tmp}/coldpin-card.lock" && flock -w 60 8
realtime=-r
chrt -f 10 true 2>/dev/null && realtime="-R -P 10"
# shellcheck disable=SC2086  # two words on purpose
jackd -n "$JACK_DEFAULT_SERVER" $realtime -p 64 -S -d dummy -r "$rate" -p "$period" -C 0 -P 0 >"$folder/server.log" 2>&1 8>&- </dev/null &
server=$!
for try in $(seq 200); do
  jack_lsp >/dev/null 2>&1 && break
  kill -0 "$server" 2>/dev/null && [ "$try" -lt 200 ] || { tail -n 5 "$folder/server.log" >&2; exit 125; }
  sleep 0.05
done
[ "$CARD_PRIVATE" = no ] && exec 8>&-

bash -c "exec $device" >"$folder/unit.log" 2>&1 </dev/null &
unit=$!
for try in $(seq 200); do
  grep -q '^ready' "$folder/unit.log" && break
  kill -0 "$unit" 2>/dev/null && [ "$try" -lt 200 ] || { cat "$folder/unit.log" >&2; exit 125; }
  sleep 0.05
done

CARD_SERVER_PID=$server CARD_DEVICE_PID=$unit timeout -k 3 "$seconds" "$@" &
command=$!
wait "$command"
status=$?
command=""
exit $status
