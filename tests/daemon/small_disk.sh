#!/bin/sh
# small_disk.sh DIR PROGRAM RIG: runs the daemon on a real disk of its own, 24 MiB, mounted for this process alone.
# DIR/fill appears: the disk is filled to the last byte; DIR/room appears: it has room again. What is in the archive at
# the end is copied to DIR/trials.
set -eu
dir=$1 program=$2 rig=$3
disk=$dir/disk
mkdir "$disk"
mount -t tmpfs -o size=24m tautrail-test "$disk"
(
    while [ ! -e "$dir/fill" ]; do sleep 0.05; done
    dd if=/dev/zero of="$disk/filler" bs=64k 2>/dev/null || true
    dd if=/dev/zero of="$disk/filler" bs=1 count=4096 oflag=append conv=notrunc 2>/dev/null || true
    touch "$dir/filled"
    while [ ! -e "$dir/room" ]; do sleep 0.05; done
    rm "$disk/filler"
) &
watching=$!
"$program" --json daemon "$rig" --dir "$disk/trials" --socket "$dir/feed.sock" --journal-budget 4 --longest-hold 0.1 &
daemon=$!
trap 'kill -TERM $daemon' TERM
code=0
wait $daemon || code=$?
# Interrupted by the signal that was handed on: the daemon still ends in order.
if [ $code -gt 128 ]; then code=0; wait $daemon || code=$?; fi
kill $watching 2>/dev/null || true
mkdir "$dir/trials"
cp "$disk"/trials/*.h5 "$dir/trials" 2>/dev/null || true
exit $code
