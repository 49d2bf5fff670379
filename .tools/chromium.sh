#!/usr/bin/env bash
# Gives the browser tests a Chromium: CHROMIUM_PATH, else /usr/bin/chromium, else Debian's package when root.
set -euo pipefail
if [ -x "${CHROMIUM_PATH:-/usr/bin/chromium}" ]; then exit 0; fi
if [ "$(id -u)" = 0 ] && command -v apt-get >/dev/null; then
  export DEBIAN_FRONTEND=noninteractive
  apt-get -o DPkg::Lock::Timeout=300 update -qq
  apt-get -o DPkg::Lock::Timeout=300 install -y -qq --no-install-recommends chromium >/dev/null
elif [ -n "${CI:-}" ]; then
  echo "No Chromium: install it or set CHROMIUM_PATH." >&2
  exit 1
else
  echo "No Chromium found: the browser tests are left out. Install it or set CHROMIUM_PATH to run them." >&2
fi
