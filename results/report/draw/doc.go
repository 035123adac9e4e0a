// Package draw is the report's own small drawing kit. A figure is a list of
// marks (paths, words, groups of them) in pixels, y downwards, whose paints are
// roles ("ink", "margin post") rather than colours; it is drawn once and then
// written by two back ends: SVG, for the page (roles become classes, so that the
// page's light and dark themes colour it) or as a file of its own (roles become
// the light theme's colours), and PNG.
//
// Rules of the package:
//
//   - A mark with a coordinate that is not finite is left out, and a line is
//     broken there: a missing value is a gap, never a point at zero.
//   - Words are measured with Liberation Sans, which has the advance widths of
//     Arial and Helvetica, the families the SVG names: a box measured here is
//     the box a browser draws, wherever one of the three is installed.
//   - A PNG shows a box for each character that Liberation Sans lacks, and letters
//     written from right to left in the order in which they are seen, Arabic ones
//     not joined. An SVG leaves both to the viewer's fonts.
//   - Nothing is told by colour alone: the callers add words, dashes or shapes.
package draw
