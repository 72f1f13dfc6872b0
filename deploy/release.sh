#!/bin/sh
# Makes a release: static binaries for amd64 and arm64, a bill of materials (CycloneDX) and the licences of each, and the sums of all. Each
# binary is built twice and must come out the same. Called by "make release".
set -eu
cd "$(dirname "$0")/.."
limit=44000000
mkdir -p "$OUT"
build() { # ARCH FILE; from an empty cache of build results in CACHE
	GOOS=linux GOARCH="$1" CGO_ENABLED=0 go build -trimpath -buildvcs=false -ldflags "-s -w -buildid= -X main.version=$VERSION" -o "$2" ./cmd/fluxwarden
}
copy=$(mktemp -d)
trap 'rm -rf "$copy"' EXIT
cp -r cmd ingest qc store rules testdata go.mod go.sum "$copy"
for arch in amd64 arm64; do
	file="$OUT/fluxwarden-linux-$arch"
	build "$arch" "$file"
	(cd "$copy" && build "$arch" "$copy/again") # from another place
	cmp "$file" "$copy/again" || { echo "$arch: two builds differ"; exit 1; }
	size=$(stat -c %s "$file")
	echo "$arch: $size bytes, the same twice"
	[ "$size" -lt "$limit" ] || { echo "$arch: more than $limit bytes"; exit 1; }
	go run ./cmd/bom -binary "$file" -version "$VERSION" -licences "$OUT/licences-$arch.txt" >"$OUT/fluxwarden-linux-$arch.cdx.json"
done
(cd "$OUT" && sha256sum fluxwarden-linux-* licences-*.txt >SHA256SUMS)
