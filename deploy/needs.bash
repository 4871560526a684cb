# What ./deploy/try and ./deploy/test need from the system, and how it is
# installed when it is missing. Sourced by both; it does nothing by itself.

oldest_postgres=15

say() { printf '%s\n' "$*"; }
fail() { printf '%s\n' "$*" >&2; exit 1; }

# newer_or_same A B: is version A at least B?
newer_or_same() { [ "$(printf '%s\n%s\n' "$1" "$2" | sort -V | head -n 1)" = "$2" ]; }

# need_go checks that the installed Go is as new as go.mod asks.
need_go() {
	local wanted have
	wanted=$(awk '$1 == "go" { print $2; exit }' go.mod)
	if ! command -v go >/dev/null && [ -x /usr/local/go/bin/go ]; then
		PATH=$PATH:/usr/local/go/bin
	fi
	command -v go >/dev/null ||
		fail "Go is missing. Install Go $wanted or newer from https://go.dev/dl/ and put its bin folder on PATH."
	have=$(cd / && GOTOOLCHAIN=local go env GOVERSION)
	have=${have#go}
	newer_or_same "${have%% *}" "$wanted" ||
		fail "Go $have is installed, but Go $wanted or newer is needed. Install it from https://go.dev/dl/."
}

# postgres_major prints the major version of the server program $1, or nothing.
postgres_major() {
	[ -x "$1" ] || return 0
	"$1" --version 2>/dev/null | sed -n 's/.*(PostgreSQL) \([0-9][0-9]*\).*/\1/p'
}

# have_postgres looks where the program looks: PGBINDIR, PATH, the packages.
have_postgres() {
	local candidate major
	if [ -n "${PGBINDIR:-}" ]; then
		set -- "$PGBINDIR/postgres"
	else
		set -- "$(command -v postgres || true)" /usr/lib/postgresql/*/bin/postgres
	fi
	for candidate; do
		major=$(postgres_major "$candidate")
		[ -n "$major" ] && [ "$major" -ge "$oldest_postgres" ] && return 0
	done
	return 1
}

have_chromium() {
	local name
	for name in chromium chromium-browser google-chrome google-chrome-stable headless-shell; do
		command -v "$name" >/dev/null && return 0
	done
	return 1
}

have_font() { [ -n "$(find /usr/share/fonts /usr/local/share/fonts -name '*.[ot]tf' -print -quit 2>/dev/null)" ]; }

have_c_compiler() { command -v gcc >/dev/null && [ -e /usr/include/stdlib.h ]; }

# as_root runs a command as root, asking sudo when we are somebody else.
as_root() {
	if [ "$(id -u)" -eq 0 ]; then
		"$@"
	elif command -v sudo >/dev/null; then
		sudo "$@"
	else
		return 127
	fi
}

# install_packages installs Debian packages and says how to do it by hand where
# that does not work.
install_packages() {
	local by_hand="Install them yourself, for example: sudo apt-get install --no-install-recommends $*"
	command -v apt-get >/dev/null ||
		fail "Missing: $*. This system has no apt-get. Install the like of these packages and start again."
	if [ "$(id -u)" -ne 0 ] && ! command -v sudo >/dev/null; then
		fail "Missing: $*. Installing needs root, and there is no sudo. $by_hand"
	fi
	say "Installing $*"
	as_root apt-get -o DPkg::Lock::Timeout=300 -q update ||
		say "The list of packages could not be refreshed. Trying with the one at hand."
	as_root env DEBIAN_FRONTEND=noninteractive \
		apt-get -o DPkg::Lock::Timeout=300 -q -y install --no-install-recommends "$@" ||
		fail "The packages could not be installed. $by_hand"
}

# install_postgres installs the server's programs and nothing that runs: Debian's
# package would otherwise create a cluster and start it. Clusters that exist are
# not touched.
install_postgres() {
	local folder=/etc/postgresql-common/createcluster.d
	local setting=$folder/00-holdfast-no-main-cluster.conf
	if command -v apt-get >/dev/null && { [ "$(id -u)" -eq 0 ] || command -v sudo >/dev/null; }; then
		# shellcheck disable=SC2064 # the path is wanted as it is now
		trap "as_root rm -f '$setting'" EXIT
		as_root mkdir -p "$folder"
		echo 'create_main_cluster = false' | as_root tee "$setting" >/dev/null
	fi
	install_packages postgresql
	as_root rm -f "$setting"
	trap - EXIT
	have_postgres ||
		fail "The packaged PostgreSQL is too old: version $oldest_postgres or newer is needed. Set PGBINDIR to the folder that holds a newer initdb and postgres."
}
