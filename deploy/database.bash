# How ./deploy/backup and ./deploy/restore reach the database. Sourced by both.

stop_with() { printf '%s\n' "$*" >&2; exit 1; }

# private_server FOLDER sets url to the server that Holdfast runs in its data
# folder. The running program notes its socket folder in the lock file.
private_server() {
	local socket
	socket=$(sed -n 2p "$1/lock" 2>/dev/null || true)
	[ -n "$socket" ] && [ -d "$socket" ] || stop_with "No private server is running in $1. Start Holdfast first."
	url="postgres://holdfast@/holdfast?host=$socket&port=5432"
}

# hide_password moves the password from url to the environment: arguments of
# programs can be seen by everybody on the machine.
hide_password() {
	if [[ $url =~ ^([a-z]+://[^:/@]*):([^@]*)@(.*)$ ]]; then
		printf -v PGPASSWORD '%b' "${BASH_REMATCH[2]//%/\\x}"
		export PGPASSWORD
		url=${BASH_REMATCH[1]}@${BASH_REMATCH[3]}
	fi
}

# on_database NAME prints url with another database in it.
on_database() {
	[[ $url =~ ^([a-z]+://[^/]*)/([^?]*)(.*)$ ]] || stop_with "The address of the database must read postgres://user@host/name."
	printf '%s\n' "${BASH_REMATCH[1]}/$1${BASH_REMATCH[3]}"
}

# newest_programs puts the newest packaged pg_dump and friends first on PATH: they
# must be at least as new as the server.
newest_programs() {
	local newest
	newest=$(printf '%s\n' /usr/lib/postgresql/*/bin | sort -V | tail -n 1)
	PATH=${PGBINDIR:-$newest}:$PATH
	command -v pg_dump >/dev/null && command -v psql >/dev/null ||
		stop_with "pg_dump is missing. Install it: sudo apt-get install postgresql-client"
}
