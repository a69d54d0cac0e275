#!/bin/sh
# Keeps one finished segment of the write-ahead log, compressed. PostgreSQL calls it, and calls again until it succeeds:
#
#   archive_mode = on
#   archive_timeout = 60
#   archive_command = 'sh /path/to/archive-wal.sh "%p" "%f" /var/backups/lampward/wal'
#
# A segment appears in the archive whole and on disk, or not at all. One that is there already with the same content
# is a success (the server was cut off before it took note); with another content it is an error.
set -eu

if [ $# -ne 3 ]; then
	echo "usage: archive-wal.sh SEGMENT_PATH SEGMENT_NAME ARCHIVE_FOLDER" >&2
	exit 2
fi
segment=$1
kept=$3/$2.gz
part=$3/.$2.part

if [ -f "$kept" ]; then
	if gunzip -c "$kept" | cmp -s - "$segment"; then
		exit 0
	fi
	echo "archive-wal.sh: $kept is there already, with another content" >&2
	exit 1
fi
gzip -1 <"$segment" >"$part"
sync "$part"
mv "$part" "$kept"
sync "$3"
