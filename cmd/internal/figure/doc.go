// Package figure draws an assessment: the Arrhenius plot with its residuals, the
// local activation energy against T, and the bootstrap distribution of the change
// of E.
//
// What is plotted (NewArrhenius, NewEnergy, NewChange) is computed apart from how
// it is drawn, so that it can be tested as numbers. Curves are told apart by
// colour (M. Okabe and K. Ito, "Color universal design", 2008) and by line style,
// sources by the shape of their marker, so that grey print keeps everything.
package figure
