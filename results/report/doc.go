// Package report turns a study into what people read: a page (one HTML file that
// needs nothing else), the same as Markdown, its figures as SVG and PNG files, its
// numbers as CSV and JSON, and a table for the terminal. The answer comes first in
// each.
//
// The package only shows. It forms no difference and no verdict; the few figures
// of its own are descriptions of stored runs: medians and quartiles of curves,
// means of the metric with a t interval, recall with an exact interval.
//
// Rules of the package:
//
//   - Every mean has its interval and its n beside it.
//   - A number that is not there is "-" in tables, null with a flag in JSON, a gap
//     in a curve; never zero.
//   - A verdict is told by a mark (filled, open, half, broken) and in words; no
//     meaning hangs on colour.
//   - An arm is evidence for all its settings together: what is said of one
//     rounding point names the arm it comes from.
//   - Costs are figures of a model and are called so.
//   - A figure is drawn by package draw twice, wide and narrow, and the page shows
//     the one that fits; files hold the wide one.
//   - The page reads in full without scripts; a script adds a crosshair, switches
//     and quick tooltips.
//
// A new figure is a file with a drawing function and a line in figureTable; a new
// section is a template and a line in sectionTable, and one in markdownTable; a
// new CSV file is a line in sheetTable.
package report
