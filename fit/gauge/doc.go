// Package gauge says what a bench can tell apart: how well a device reads the
// same when it is put in again, by the same and by other hands, whether readings
// drift along a session, and which devices have changed since they were measured
// last.
//
// It takes values of single measurings and gives back numbers and sentences. It
// corrects no value by itself: raw and corrected numbers stand side by side.
package gauge
