#!/bin/sh
# Copies archive and journal of a daemon to another folder, or back. The daemon may run while it is copied from; it must not run while it is
# copied to. What a copy under way tears is told by "fluxwarden verify".
#   backup.sh copy STATE-FOLDER BACKUP-FOLDER     archive, and the journal if the daemon is stopped
#   backup.sh restore BACKUP-FOLDER STATE-FOLDER
set -eu
usage() { sed -n '2,6s/^# //p' "$0" >&2; exit 2; }
[ $# -eq 3 ] || usage
from=$2 to=$3
[ -d "$from/archive" ] || { echo "backup: $from: no folder archive in it" >&2; exit 2; }
case $1 in
copy)
	mkdir -p "$to"
	# Commit records last: a record in the copy then never names a file that the copy lacks.
	mkdir -p "$to/archive"
	(cd "$from/archive" && tar -cf - --exclude=./commit --exclude=./staging --warning=no-file-changed --ignore-failed-read .) | tar -xf - -C "$to/archive"
	(cd "$from/archive" && tar -cf - staging commit 2>/dev/null || true) | tar -xf - -C "$to/archive"
	if [ -d "$from/journal" ]; then rm -rf "$to/journal"; cp -a "$from/journal" "$to/journal"; fi
	[ ! -f "$from/notify.jsonl" ] || cp -a "$from/notify.jsonl" "$to/"
	;;
restore)
	[ ! -e "$to/archive" ] || { echo "backup: $to/archive is there already; move it away first" >&2; exit 1; }
	mkdir -p "$to"
	cp -a "$from/." "$to/"
	;;
*) usage ;;
esac
sync
