#!/bin/bash
# Takes a base backup of the whole database server while it works, and verifies it.
#
#   LAMPWARD_DATABASE_URL=postgres://... backup.sh FOLDER [KEEP]
#
# The role of the URL must be a superuser or have REPLICATION, and pg_hba.conf must let it in for replication. FOLDER
# gets base-<UTC time>, beside the folder wal that archive-wal.sh fills. The newest KEEP base backups (default 7) are
# kept, and of the archive what the oldest of those needs. Run as root, it goes on as the owner of FOLDER.
set -euo pipefail

fail() {
	echo "backup.sh: $*" >&2
	exit 1
}

if [ $# -lt 1 ] || [ $# -gt 2 ]; then
	echo "usage: LAMPWARD_DATABASE_URL=postgres://... backup.sh FOLDER [KEEP]" >&2
	exit 2
fi
folder=$1
keep=${2:-7}
[[ $keep =~ ^[1-9][0-9]*$ ]] || fail "KEEP must be a whole number above 0, not '$keep'"
[ -d "$folder" ] || fail "$folder is not a folder: make it, owned by the account that runs PostgreSQL"
[ -n "${LAMPWARD_DATABASE_URL:-}" ] || fail "LAMPWARD_DATABASE_URL is not set"
if [ "$(id -u)" = 0 ] && [ "$(stat -c %u "$folder")" != 0 ]; then
	exec setpriv --reuid="$(stat -c %u "$folder")" --regid="$(stat -c %g "$folder")" --clear-groups -- \
		bash "${BASH_SOURCE[0]}" "$@"
fi

# The programs: given, in the PATH, or the newest of a Debian or Red Hat installation.
if [ -z "${PGBIN:-}" ]; then
	if path=$(command -v pg_basebackup); then
		PGBIN=$(dirname "$(readlink -f "$path")")
	else
		PGBIN=$(find /usr/lib/postgresql/*/bin /usr/pgsql-*/bin -name pg_basebackup -printf '%h\n' 2>/dev/null | sort -V | tail -n 1)
	fi
fi
[ -x "$PGBIN/pg_basebackup" ] && [ -x "$PGBIN/pg_verifybackup" ] || fail "no pg_basebackup and pg_verifybackup found: set PGBIN to their folder"

# The password goes through the environment, not through the list of processes.
url=$LAMPWARD_DATABASE_URL
if [[ $url =~ ^(postgres(ql)?://[^:/@]*):([^@]*)@(.*)$ ]]; then
	url=${BASH_REMATCH[1]}@${BASH_REMATCH[4]}
	escaped=${BASH_REMATCH[3]//\\/\\\\}
	printf -v PGPASSWORD '%b' "${escaped//%/\\x}"
	export PGPASSWORD
fi

exec 9>"$folder/.lock"
flock -n 9 || fail "another backup into $folder is at work"
umask 077
name=base-$(date -u +%Y%m%dT%H%M%SZ)
part=$folder/.$name.part
[ ! -e "$folder/$name" ] || fail "$folder/$name exists"
rm -rf "$folder"/.base-*.part
trap 'rm -rf "$part"' EXIT

progress=()
[ -t 1 ] && progress=(--progress)
"$PGBIN/pg_basebackup" --dbname="$url" --pgdata="$part" --format=plain --wal-method=stream --checkpoint=fast \
	--no-password --label="$name" ${progress[@]+"${progress[@]}"}
"$PGBIN/pg_verifybackup" --quiet "$part"
sync -f "$part"
mv "$part" "$folder/$name"
sync "$folder"
echo "kept $folder/$name ($(du -sh "$folder/$name" | cut -f 1))"

# What is older than the newest KEEP goes, and then the log before the oldest that stays.
mapfile -t bases < <(find "$folder" -mindepth 1 -maxdepth 1 -type d -name 'base-*' -printf '%f\n' | sort)
while [ ${#bases[@]} -gt "$keep" ]; do
	rm -rf "${folder:?}/${bases[0]}"
	echo "removed $folder/${bases[0]}"
	bases=("${bases[@]:1}")
done
if [ -d "$folder/wal" ]; then
	first=$(sed -n 's/^START WAL LOCATION: .*(file \([0-9A-F]*\))$/\1/p' "$folder/${bases[0]}/backup_label")
	[ -n "$first" ] || fail "$folder/${bases[0]}/backup_label does not say where its log begins"
	"$PGBIN/pg_archivecleanup" -x .gz "$folder/wal" "$first"
else
	echo "backup.sh: there is no $folder/wal: without the archived log only the moment of this backup can be restored" >&2
fi
