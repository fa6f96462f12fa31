#!/bin/sh
# Renews the echarts script of the report page from the npm package.
#
#   reports/page/assets/refresh.sh           the version of ECHARTS-VERSION
#   reports/page/assets/refresh.sh 6.1.0     that version, which is then recorded
#
# The "common" build has bars, lines and scatters, which is all the page draws.
# Look at the page and run its tests afterwards: go test ./reports/page/...
set -eu

here=$(cd "$(dirname "$0")" && pwd)
version=${1:-$(cat "$here/ECHARTS-VERSION")}

work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT

cd "$work"
npm pack --silent "echarts@$version" >/dev/null
tar -xzf "echarts-$version.tgz"

cp package/dist/echarts.common.min.js "$here/echarts.min.js"
cp package/LICENSE "$here/ECHARTS-LICENSE"
cp package/NOTICE "$here/ECHARTS-NOTICE"
echo "$version" >"$here/ECHARTS-VERSION"
echo "echarts $version in place"
