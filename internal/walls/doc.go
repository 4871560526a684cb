// Package walls holds the test that keeps imports running one way:
//
//	cmd -> web -> plant <- store,  plant -> spc/... -> spc/dist
//
// Statistics know nothing of ours, the domain knows no database and no HTTP, pages know
// no SQL, and surfaces do not know one another.
package walls
