// Package admin is the administrators' surface: how people are managed, and the
// installation qualification as a page that prints as a record.
//
// The qualification runs in the background, one at a time, on a context that does not
// end with the request; Close ends it. While it runs the page says how far it is. The
// last finished record of this process is shown until the next one replaces it or the
// program stops: who needs it longer prints it or keeps the file.
package admin
