#!/bin/sh
# Makes the Debian package from what "make install" puts into an empty root. Called by "make deb".
set -eu
cd "$(dirname "$0")/.."
root=$(mktemp -d)
trap 'rm -rf "$root"' EXIT
chmod 0755 "$root"
umask 022
: "${SOURCE_DATE_EPOCH:=$(git log -1 --format=%ct 2>/dev/null || echo 1767225600)}"
export SOURCE_DATE_EPOCH
doc="$root/usr/share/doc/fluxwarden"

"$MAKE" --no-print-directory install DESTDIR="$root" OUT="$OUT" VERSION="$VERSION" ARCH="$ARCH" >/dev/null
install -m 0644 debian/copyright "$doc/copyright"
sed -e "s/@VERSION@/$VERSION/" -e "s/@DATE@/$(date -u -R -d "@$SOURCE_DATE_EPOCH")/" debian/changelog.in | gzip -9n >"$doc/changelog.gz"
install -D -m 0644 debian/fluxwarden.1 "$root/usr/share/man/man1/fluxwarden.1"
gzip -9n "$root/usr/share/man/man1/fluxwarden.1"
install -D -m 0644 debian/lintian-overrides "$root/usr/share/lintian/overrides/fluxwarden"

install -d -m 0755 "$root/DEBIAN"
size=$(du -sk --exclude=DEBIAN "$root" | cut -f1)
sed -e "s/@VERSION@/$VERSION/" -e "s/@ARCH@/$ARCH/" -e "s/@SIZE@/$size/" debian/control.in >"$root/DEBIAN/control"
echo /etc/fluxwarden/settings.yaml >"$root/DEBIAN/conffiles"
for script in postinst prerm postrm; do install -m 0755 "debian/$script" "$root/DEBIAN/$script"; done
(cd "$root" && find usr lib etc -type f ! -path etc/fluxwarden/settings.yaml -print0 | sort -z | xargs -0 md5sum) >"$root/DEBIAN/md5sums"
find "$root" -newermt "@$SOURCE_DATE_EPOCH" -exec touch -h -d "@$SOURCE_DATE_EPOCH" {} +
mkdir -p "$OUT"
dpkg-deb --root-owner-group -Zxz -z1 --build "$root" "$OUT/fluxwarden_${VERSION}_$ARCH.deb"
