// Package survey assesses many data sets and keeps what it found: it finds the data
// sets of files, folders, long tables and workbooks, assesses each by itself on all
// processors, and puts a row and the whole assessment of each into one file, the
// store. A run that was killed goes on where it stopped. A file or data set that
// cannot be used is a row with its error.
package survey
