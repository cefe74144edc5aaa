package diagnostics

// publishStyle is the style in which results are published.
func (a *assessor) publishStyle() string { return a.opt.PublishStyle }

// publishInto states every curve in its forms and what to publish.
func (a *assessor) publishInto(doc *Assessment) {
	doc.Publish = Publish{Style: doc.Settings.PublishStyle, Curve: a.verdict.RecommendedCurve, Lines: []PublishLine{}, Notes: []string{}}
}
