// Package describe reads a description of a plant from one table, as a CSV or an XLSX
// file, and writes the present set-up in the same form.
//
// A row describes one characteristic with all that it hangs on: its line, station,
// machine, gauge and the part or family of parts. A row without a characteristic
// describes only what else it names. The first row holds the names of the columns
// (Columns lists them); their order is free, and those that are not needed may be left
// out. Within a file things are known by their names, as in the plant.
//
// A row may also name one shift and when it starts. The shifts of a file become the
// calendar of a plant that has none; a calendar that is there is changed on its page only,
// since one more shift would change when the others end.
//
// Reading decides nothing by guess: what cannot be understood is a Problem with its row
// and column, and a file with problems adds nothing. What is in the plant already stays
// as it is, so the same file may be read again.
//
// A CSV file may be separated by comma, semicolon or tabulator, and be UTF-8, UTF-16 with
// a byte order mark or Windows-1252. Comma and point are both decimal signs.
package describe
