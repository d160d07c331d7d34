// Package scpi holds a conversation with an SCPI instrument over an open line: one
// query at a time, completion asked for, the error queue read. It covers the
// subset of IEEE 488.2 and SCPI-1999 that reading a meter and driving a supply
// need, and the letter dialects of supplies by templates of their commands.
//
// It opens no line and decides nothing: what a refused command means for the
// device on the bench is for its caller.
package scpi
