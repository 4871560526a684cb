// Package words is the message catalogue: every word that the station, the
// sign-in and the shared parts say, by key, in every language there is.
//
// # Adding words
//
// Each surface has one file a language, en/station.json, en/door.json,
// en/ui.json, and each key begins with the name of its file:
//
//	{
//	  "station.next-part": "Next part",
//	  "station.measure":   "Measure part %d of %d",
//	  "station.left": {
//	    "one":   "%d part left",
//	    "other": "%d parts left"
//	  },
//	  "station.rounds-of": {
//	    "plural": 2,
//	    "=0":    "%[1]s: nothing waits",
//	    "one":   "%[1]s: %[2]d round waits",
//	    "other": "%[1]s: %[2]d rounds wait"
//	  }
//	}
//
// A message is a format as fmt knows it. Where a number decides the wording it is
// an object instead, with the plural forms of the language ("zero", "one", "two",
// "few", "many", "other"; "=0" for an exact number). "plural" says which argument
// decides, the first when it is left out. "other" must always be there. A whole
// number given for %d gets the grouping of the language; everything else that has
// decimals or a unit is formatted first (ui.Format) and given for %s.
//
// Sentences are whole: never build one from pieces, since other languages order
// them otherwise. A new surface adds its own file; the file is found by its
// folder, nothing has to be registered.
//
// # Using words
//
//	w := words.From(r)          // in a handler; the shell of a page has it as Words
//	w.T("station.measure", 4, 5)
//	w.T("ui.state." + string(condition))
//
// Write the key as a literal, or as a literal ending in a point and one more
// part. A test reads the sources under web/ and fails when a key is not in the
// catalogue, when a call has another number of arguments than its message, and
// when a word in the catalogue is used nowhere.
//
// # Problems
//
// The sentence of a plant.Error is written in English where the problem is found.
// Other languages find theirs by that sentence, or by its format, in problems.json:
//
//	"At most %d rules can be on.": "Höchstens %d Regeln können eingeschaltet sein."
//
// An area with many of them may have a file of its own, problems-reaction.json. A page
// says it by Printer.Problem, or ui.ProblemOf at a field. A test reads the
// sources and names each sentence that a language lacks, and each that is said
// nowhere any more.
//
// # Languages
//
// English is embedded. Another language is another folder with the same files and
// keys; a key that it lacks is shown in English. Tests of the layout register the
// pseudo-locale of words/wordstest: English, accented, in brackets and about a
// third longer, which shows at once what is cut off and what was never
// translated.
package words
