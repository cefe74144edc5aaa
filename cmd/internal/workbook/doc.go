// Package workbook reads the sheets of .xlsx workbooks into tables of
// models/dataset.
//
// The parts of the file are read here, as streams: whether a cell is text, a number,
// a date, or a formula without a stored result decides what may be read from it.
// The streaming iterator of excelize gives strings without their kinds, and it takes
// what is left of a part that was damaged for the whole. excelize writes the
// workbooks of the tests instead.
//
// Sources: ECMA-376-1:2016 (Office Open XML), 18.2 workbook, 18.3 worksheets, 18.4
// shared strings, 18.8.30 and 18.8.31 number formats, 18.17.4 dates.
package workbook
