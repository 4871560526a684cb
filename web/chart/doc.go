// Package chart draws the control charts and plots of every surface as SVG.
//
// A chart is a plain struct of numbers and of labels that are already words:
// decimals, units, rule sentences and times are the caller's. The package
// decides geometry only: scales, stepped bands, where the line breaks, which
// dots are thinned, and how flags are stacked so that none crosses another. It
// knows no statistics and no clock; limits come in as numbers.
//
// What it writes:
//
//   - SVG markup with classes and geometry attributes, never a style attribute
//     or a script, so that a strict content policy holds. Colours and fonts are
//     in static/css/chart.css.
//   - Coordinates with one decimal. A value that is NaN or infinite is a
//     missing value; it breaks the line and never reaches the markup.
//   - All text escaped. Pattern ids are built from the chart's ID, which the
//     page keeps unique.
//
// A chart that is only looked at has role="img" and one sentence. The control
// chart is a group whose points are targets of their own: each has a title that
// says time and value, the newest is in the tab order, and static/js/points.js
// moves between them with the arrow keys. Every chart has a Table method, the
// same facts as rows for "Show as a table".
//
// Values beyond the axis are drawn at its edge with a chevron, and their number
// stands beside it.
package chart
