#!/bin/sh
# SPDX-License-Identifier: Apache-2.0
# Every header compiles alone.
#   headers.sh TOP CC
top=$1 cc=$2 failed=0 count=0
libraries=$(pkg-config --cflags libxml-2.0 jansson)
cd "$top" || exit 1
for header in checks/*.h checks/base/*.h rigs/*.h rigs/*/*.h suites/*.h reports/*.h runner/*.h; do
	case $header in *_list.h) continue ;; esac # rows, included with a macro defined
	count=$((count + 1))
	"$cc" -std=c17 -D_GNU_SOURCE -DDRIVETRIAL_VERSION='""' -Ichecks/base -Ichecks -Irigs/links \
		-Irigs/yaml -Irigs/model -Irigs -Isuites -Ireports -Irunner -Wall -Wextra -Werror \
		$libraries -fsyntax-only "$header" || { failed=$((failed + 1)); echo "FAILED: $header" >&2; }
done
echo "$((count - failed)) passed, $failed failed"
[ "$failed" -eq 0 ] && [ "$count" -gt 20 ]
