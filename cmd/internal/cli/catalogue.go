package cli

import (
	"fmt"
	"slices"

	"github.com/spf13/cobra"

	"onebarrier/cmd/internal/report"
	"onebarrier/cmd/internal/survey"
	"onebarrier/diagnostics"
	"onebarrier/models"
)

func newModels(a *app) *cobra.Command {
	cmd := &cobra.Command{
		Use:   "models [NAME]",
		Short: "List the curves that can be fitted, with formula, parameters, units and source",
		Example: `  onebarrier models
  onebarrier models parallel
  onebarrier models eyring --json`,
		Args: atMost(1, "NAME"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.runModels(args)
		},
		ValidArgsFunction: completeWords(models.Names),
	}
	a.addJSON(cmd)
	return cmd
}

func (a *app) runModels(args []string) error {
	curves := models.All()
	if len(args) > 0 {
		c, err := models.Lookup(args[0])
		if err != nil {
			return unknownName("curve or form", args[0], models.Names(), "onebarrier models lists them")
		}
		curves = []models.Curve{c}
	}
	doc := report.NewModels(curves)
	if a.json {
		return report.JSON(a.out, doc)
	}
	return report.WriteModels(a.out, doc, len(args) > 0, a.text())
}

func newExplain(a *app) *cobra.Command {
	cmd := &cobra.Command{
		Use:   "explain [CODE]",
		Short: "Explain a verdict, a finding or a refusal in full, or list them all",
		Long: "explain tells the whole story of a verdict, a finding, a refusal or notice of\n" +
			"reading, or of the columns p_value, p_band, q_value and q_band of a survey.",
		Example: `  onebarrier explain
  onebarrier explain beyond-prefactor
  onebarrier explain unresolved --json`,
		Args: atMost(1, "CODE"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.runExplain(args)
		},
		ValidArgsFunction: completeWords(explained),
	}
	a.addJSON(cmd)
	return cmd
}

func (a *app) runExplain(args []string) error {
	entries := diagnostics.Catalogue()
	if len(args) > 0 {
		e, err := diagnostics.Explain(args[0])
		if i := slices.IndexFunc(survey.Explained, func(e diagnostics.Entry) bool { return e.Code == args[0] }); i >= 0 {
			e, err = survey.Explained[i], nil
		}
		if err != nil {
			return unknownName("verdict or finding", args[0], explained(), "onebarrier explain lists them")
		}
		entries = []diagnostics.Entry{e}
	}
	doc := report.NewFindings(entries)
	if a.json {
		return report.JSON(a.out, doc)
	}
	return report.WriteFindings(a.out, doc, len(args) > 0, a.text())
}

// explained lists what explain knows.
func explained() []string {
	codes := diagnostics.Codes()
	for _, e := range survey.Explained {
		codes = append(codes, e.Code)
	}
	return codes
}

func newSchema(a *app) *cobra.Command {
	return &cobra.Command{
		Use:   "schema [NAME]",
		Short: "Print the JSON Schema of a document, or list the documents",
		Example: `  onebarrier schema
  onebarrier schema assessment`,
		Args: atMost(1, "NAME"),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.runSchema(args)
		},
		ValidArgsFunction: completeWords(report.SchemaNames),
	}
}

func (a *app) runSchema(args []string) error {
	if len(args) == 0 {
		for _, name := range report.SchemaNames() {
			if _, err := fmt.Fprintln(a.out, name); err != nil {
				return err
			}
		}
		return nil
	}
	b, err := report.Schema(args[0])
	if err != nil {
		return unknownName("document", args[0], report.SchemaNames(), "onebarrier schema lists them")
	}
	_, err = a.out.Write(b)
	return err
}

// unknownName refuses a name that is in no list, with the nearest one that is.
func unknownName(what, name string, known []string, cure string) error {
	if s := closest(name, known); s != "" {
		cure = fmt.Sprintf("did you mean %q?", s)
	}
	return usagef(cure, "no %s is named %q", what, name)
}
