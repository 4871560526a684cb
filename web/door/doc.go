// Package door is the way in and out: the sign-in page, signing out, and where each
// person's work begins. Who is let in is decided by internal/auth; the door asks it
// through two small interfaces and shows what it says.
//
// In the demonstration the page also has a button for each invented person. They
// are there only when the program was started as a demonstration, the plant is
// marked as one, and the browser is on this machine; all three are checked again
// when a button is pressed.
package door
