// Package replay reads logs that were recorded meter by meter, each with a clock of
// its own, and brings them to one time base: readings as they would have come in
// live. Notes with times cut a log into devices.
//
// It never guesses a date: what the times leave open is asked, or refused with
// its place.
package replay
