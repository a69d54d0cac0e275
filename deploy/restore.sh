#!/bin/bash
# Restores a data folder from a base backup and the archived log, checks it, and leaves it ready for a start.
#
#   restore.sh --from FOLDER --to DATA [--base NAME] [--old-wal PG_WAL] [--until TIME]
#              [--user ROLE] [--database NAME] [--lampward PROGRAM]
#
#   --from      what backup.sh and archive-wal.sh filled: base-... and wal/
#   --to        the new data folder: absent or empty
#   --base      which base backup; the newest before TIME otherwise
#   --old-wal   pg_wal of the lost server, if it can still be read: holds what was not archived yet
#   --until     restore to this moment, such as '2026-03-01 14:30:00+01'; to the last record otherwise
#   --user      a superuser in the database, "lampward" unless given; --database likewise
#   --lampward  the program, which then verifies the audit chain of every building
#
# It fails where a segment of the log is damaged or missing in the middle, instead of stopping early without a word.
# Run as root, it goes on as the owner of --from. The server is started on a private socket for the time of recovery.
set -euo pipefail

fail() {
	echo "restore.sh: $*" >&2
	exit 1
}
usage() {
	sed -n '2,/^set /{/^set /d;s/^# \{0,1\}//;p}' "${BASH_SOURCE[0]}" >&2
	exit 2
}

from='' to='' base='' old_wal='' until='' user=lampward database=lampward lampward=''
arguments=("$@")
while [ $# -gt 0 ]; do
	[ $# -ge 2 ] || usage
	case $1 in
	--from) from=$2 ;;
	--to) to=$2 ;;
	--base) base=$2 ;;
	--old-wal) old_wal=$2 ;;
	--until) until=$2 ;;
	--user) user=$2 ;;
	--database) database=$2 ;;
	--lampward) lampward=$2 ;;
	*) usage ;;
	esac
	shift 2
done
[ -n "$from" ] && [ -n "$to" ] || usage
[ -d "$from" ] || fail "$from is not a folder"
if [ -e "$to" ] && [ -n "$(ls -A "$to")" ]; then
	fail "$to is not empty: move it away first, and keep it until all is well (its pg_wal is for --old-wal)"
fi
if [ -n "$old_wal" ] && [ ! -d "$old_wal" ]; then fail "$old_wal is not a folder"; fi
if [ -n "$lampward" ] && [ ! -x "$lampward" ]; then fail "$lampward cannot be run"; fi
if [ "$(id -u)" = 0 ]; then
	owner=$(stat -c %u "$from") group=$(stat -c %g "$from")
	[ "$owner" != 0 ] || fail "$from belongs to root, as whom PostgreSQL does not run: give it to postgres"
	install -d -o "$owner" -g "$group" -m 700 "$to"
	exec setpriv --reuid="$owner" --regid="$group" --clear-groups -- bash "${BASH_SOURCE[0]}" "${arguments[@]}"
fi
umask 077
from=$(readlink -f "$from")
mkdir -p "$to"
to=$(readlink -f "$to")

# The base: the one named, or the newest that was finished by the moment asked for.
if [ -z "$base" ]; then
	limit=99999999T999999Z
	if [ -n "$until" ]; then
		limit=$(date -u -d "$until" +%Y%m%dT%H%M%SZ) || fail "--until: '$until' is not a time"
	fi
	while read -r name; do
		[[ ${name#base-} > $limit ]] || base=$name
	done < <(find "$from" -mindepth 1 -maxdepth 1 -type d -name 'base-*' -printf '%f\n' | sort)
	[ -n "$base" ] || fail "$from has no base backup${until:+ from before $until}"
fi
[ -f "$from/$base/PG_VERSION" ] || fail "$from/$base is not a base backup"

major=$(cat "$from/$base/PG_VERSION")
if [ -z "${PGBIN:-}" ]; then
	for dir in "/usr/lib/postgresql/$major/bin" "/usr/pgsql-$major/bin" "$(dirname "$(readlink -f "$(command -v postgres || echo /usr/bin/postgres)")")"; do
		if [ -x "$dir/postgres" ]; then
			PGBIN=$dir
			break
		fi
	done
fi
[ -x "${PGBIN:-}/postgres" ] || fail "no programs of PostgreSQL $major found: set PGBIN to their folder"
[[ "$("$PGBIN/postgres" --version)" =~ \)\ $major ]] || fail "the backup needs PostgreSQL $major, and $PGBIN has $("$PGBIN/postgres" --version)"
psql=$PGBIN/psql
[ -x "$psql" ] || psql=$(command -v psql) || fail "no psql found: set PGBIN to its folder"

echo "restoring $from/$base to $to"
"$PGBIN/pg_verifybackup" --quiet "$from/$base"
cp -a "$from/$base/." "$to/"
rm -f "$to/postmaster.pid" "$to/backup_manifest"
if [ -n "$old_wal" ]; then
	# The lost server's copy of a segment reaches at least as far as the backup's.
	find "$old_wal" -maxdepth 1 -type f -regextype posix-extended \
		-regex '.*/([0-9A-F]{24}|[0-9A-F]{8}\.history)' -exec cp -t "$to/pg_wal" -- {} +
fi
touch "$to/recovery.signal"

# The server for the recovery takes nothing from the backup's own configuration, which may not even be in it.
work=$(mktemp -d /tmp/lampward-restore-XXXXXX)
server=''
finish() {
	if [ -n "$server" ] && kill -0 "$server" 2>/dev/null; then
		kill -INT "$server"
		wait "$server" || true
	fi
	rm -rf "$work"
}
trap finish EXIT
trap 'exit 130' INT TERM
archive=$from/wal
cat >"$work/fetch" <<'END'
# fetch ARCHIVE NAME TARGET: status 1 says there is none, which ends the log; 200 says it is damaged, which stops all.
[ -f "$1/$2.gz" ] || exit 1
gunzip -c "$1/$2.gz" >"$3" || exit 200
END
# The server hands the command to a shell and reads % as its own sign.
printf -v fetch 'sh %q %q %%f %%p' "$work/fetch" "${archive//%/%%}"
: >"$work/postgresql.conf"
: >"$work/ident"
echo 'local all all trust' >"$work/hba" # within a folder that this account alone may enter
settings=(
	-c config_file="$work/postgresql.conf" -c hba_file="$work/hba" -c ident_file="$work/ident"
	-c listen_addresses= -c unix_socket_directories="$work" -c port=5432 -c ssl=off
	-c max_connections=20 -c archive_mode=off -c hot_standby=off -c logging_collector=off -c lc_messages=C
	-c restore_command="$fetch" -c recovery_target_action=promote
)
if [ -n "$until" ]; then
	settings+=(-c recovery_target_time="$(date -u -d "$until" '+%Y-%m-%d %H:%M:%S.%6N+00')")
fi
"$PGBIN/postgres" -D "$to" "${settings[@]}" >"$work/log" 2>&1 &
server=$!

ask() { "$psql" -XAtq -v ON_ERROR_STOP=1 -h "$work" -U "$user" -d "$database" -c "$1"; }
died() {
	sed 's/^/  /' "$work/log" | tail -n 20 >&2
	fail "the server ended during recovery; the end of its log is above"
}
until ask 'SELECT 1' >/dev/null 2>"$work/refused"; do
	kill -0 "$server" 2>/dev/null || died
	if grep -Eq 'role .* does not exist|database .* does not exist' "$work/refused"; then
		fail "$(cat "$work/refused"): see --user and --database"
	fi
	sleep 0.2
done
[ "$(ask 'SELECT pg_is_in_recovery()')" = f ] || fail "the server did not leave recovery"

# Recovery ends at the first segment that is not there. That is the end of the log only if no later one is.
done_at=$(sed -n 's/.*redo done at \([0-9A-F]*\/[0-9A-F]*\).*/\1/p' "$work/log" | tail -n 1)
if [ -z "$until" ] && [ -n "$done_at" ] && [ -d "$archive" ]; then
	reached=$(ask "SELECT pg_walfile_name('$done_at')")
	last=$(find "$archive" -maxdepth 1 -name '????????????????????????.gz' -printf '%f\n' | cut -c 1-24 | sort | tail -n 1)
	if [[ -n $last && ${last:8} > ${reached:8} ]]; then
		fail "the log ends in segment ${reached:8}, yet the archive goes on to ${last:8}: a segment between them is missing"
	fi
fi
when=$(sed -n 's/.*last completed transaction was at log time \(.*\)$/\1/p' "$work/log" | tail -n 1)
echo "recovered${done_at:+ up to $done_at}${when:+, last transaction at $when}"

if [ -n "$lampward" ]; then
	LAMPWARD_DATABASE_URL="postgres://$user@/$database?host=$work" "$lampward" audit verify
fi

kill -INT "$server"
wait "$server" || fail "the server did not stop cleanly: $(tail -n 5 "$work/log")"
server=''
echo "$to is ready: start PostgreSQL on it, then take a new base backup"
