#!/bin/sh
# Runs a binary as the image lays it out, without an engine: a root of its own that is read-only and holds nothing but the binary, /config and
# /proc, another uid without any capability, one writable volume. Needs root.
#   layout.sh BINARY CONFIG-FOLDER STATE-FOLDER [ARGUMENTS; the image's if there are none]
set -eu
binary=$(realpath "$1") config=$(realpath "$2") state=$(realpath "$3")
shift 3
[ $# -gt 0 ] || set -- run --site /config/site.yaml --settings /config/settings.yaml
root=$(mktemp -d)
install -m 0755 "$binary" "$root/fluxwarden"
mkdir "$root/config" "$root/state" "$root/proc" "$root/dev"
chown 65532:65532 "$state"
chmod 0755 "$root"
export root config state
# The mounts live in a namespace of their own and end with it; only the folder is left, and the caller's temporary folder takes it.
exec unshare --mount --propagation private sh -eu -c '
mount --bind "$root" "$root"
mount --bind "$config" "$root/config"
mount -o remount,ro,bind "$root/config"
mount --bind "$state" "$root/state"
mount -t proc proc "$root/proc"
mount -o remount,ro,bind "$root"
cd "$root"
exec env -i STATE_DIRECTORY=/state setpriv --no-new-privs /usr/sbin/chroot --userspec=65532:65532 --groups=65532 "$root" /fluxwarden "$@"
' layout "$@"
