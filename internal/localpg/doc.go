// Package localpg runs a private PostgreSQL server for one program: the demo,
// an installation on a single box, and the tests. It finds the installed
// binaries, creates a cluster in a data folder, starts the server on a socket in
// a folder only its owner may enter, and stops it again.
//
// What always holds:
//
//   - One program a data folder. A lock on the folder lasts as long as the
//     program; a second one is refused with an [InUseError].
//   - The server ends with the program, also when the program is killed: the
//     kernel then asks it for a fast shutdown. What survives nevertheless is found
//     and ended at the next start, before the data are opened again.
//   - It listens on no network address and needs no password: the socket folder
//     is the wall. Every role may be used through it.
//   - Committed data are on the disk, except in a cluster started with
//     [Options.ThrowAway].
//   - It never runs as root. Started by root, it runs as the user postgres, or
//     nobody where there is no such user.
//
// The package knows nothing of the tables inside: it makes sure that the
// database "holdfast" exists and leaves the rest to the migrations. It needs
// Linux, for /proc and for the signal at the parent's death.
//
// Inside the data folder:
//
//	lock          held by the running program; its process id and socket folder
//	pgdata        the cluster
//	postgres.log  what the server printed; postgres.log.1 is the one before
//	run-XXXX      the socket folder of this run
package localpg
