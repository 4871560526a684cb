package store

// CheckRecordIn is CheckRecord inside a transaction of the test's own, which sees what it
// has changed and takes it back.
var CheckRecordIn = checkRecord
