// Package deploy is no code: the folder holds what installs, runs and backs up
// the program. Its tests run the scripts against a real PostgreSQL server.
package deploy
