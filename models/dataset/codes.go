package dataset

// Codes of problems: why a file cannot be used.
const (
	codeReadFailed           = "read-failed"
	codeNotText              = "not-text"
	codeUnclosedQuote        = "unclosed-quote"
	codeTooManyColumns       = "too-many-columns"
	codeNoData               = "no-data"
	codeNoHeading            = "no-heading"
	codeOnItsSide            = "table-on-its-side"
	codeDuplicateHeading     = "duplicate-heading"
	codeRagged               = "ragged-row"
	codeNoTemperature        = "no-temperature"
	codeAmbiguousTemperature = "ambiguous-temperature"
	codeNoRate               = "no-rate"
	codeAmbiguousRate        = "ambiguous-rate"
	codeSeveralRates         = "several-rates"
	codeColumnUnknown        = "column-unknown"
	codeRoleUnknown          = "role-unknown"
	codeRoleTwice            = "role-named-twice"
	codeMixedMarks           = "mixed-decimal-marks"
	codeAmbiguousMark        = "ambiguous-decimal-mark"
	codeNotNumber            = "not-a-number"
	codeNotFinite            = "not-finite"
	codeTNotPositive         = "temperature-not-positive"
	codeTFactor              = "temperature-factor"
	codeKNotPositive         = "rate-not-positive"
	codeNegativeU            = "negative-uncertainty"
	codeBadFactor            = "bad-uncertainty-factor"
	codeBadCoverage          = "bad-coverage-factor"
	codeBadRepeats           = "bad-number-of-repeats"
	codeBadLimit             = "bad-limit"
	codeUnitConflict         = "unit-conflict"
	codeDisagree             = "columns-disagree"
	codeDatasetUnknown       = "dataset-unknown"
	codeWhere                = "where-not-understood"
	codeLeaveOut             = "leave-out-unknown"
	codeDecimalOption        = "decimal-unknown"
	codeAssume               = "assumption-not-understood"
	codePoolTwice            = "pooled-twice"
	codePoolQuantity         = "pooled-quantities"
	codePoolUnit             = "pooled-units"
	codeTidyCell             = "tidy-cell"
	codeDatasetScattered     = "dataset-scattered"
	codeBelowBlank           = "rows-below-blank"
	codeTooLong              = "too-long"

	// Of surveys; cmd/internal/survey raises them.
	codeColumnsFile   = "columns-file"
	codeInternalError = "internal-error"

	// Of workbooks; cmd/internal/workbook raises them.
	codeWorkbookDamaged   = "workbook-damaged"
	codeWorkbookTooLarge  = "workbook-too-large"
	codeWorkbookEncrypted = "workbook-encrypted"
	codeWorkbookFormat    = "workbook-format"
	codeSeveralSheets     = "several-sheets"
	codeSheetUnknown      = "sheet-unknown"
	codeScattered         = "cells-scattered"
	codeDateCell          = "date-cell"
	codeFormula           = "formula-without-value"
)

// Codes of notices: what a user should know of a file that can.
const (
	noteEncoding       = "encoding-windows-1252"
	noteTitle          = "title-rows"
	noteJoined         = "heading-rows-joined"
	noteCommentHeading = "heading-in-comment"
	noteLost           = "superscript-lost"
	noteKept           = "column-not-used"
	noteUnit           = "unit-not-understood"
	noteUnitWithheld   = "unit-without-standard-state"
	noteTimeLike       = "time-like"
	noteSeveral        = "several-columns"
	noteGap            = "kelvin-gap"
	noteSideBySide     = "repeats-side-by-side"
	noteSpareMean      = "mean-beside-repeats"
	noteWhichRepeat    = "uncertainty-of-which-repeat"
	noteAssumedUnit    = "uncertainty-unit-assumed"
	noteLevel          = "uncertainty-not-used"
	noteRepeats        = "repeats-missing"
	noteOtherU         = "uncertainty-spare"
	noteBrackets       = "brackets-standard"
	noteFewRepeats     = "mean-of-few-repeats"
	noteMissing        = "rows-without-value"
	noteLimits         = "limits-read"
	noteAfter          = "rows-after-table"
	noteGoesOn         = "blank-rows"
	noteNotRead        = "rows-not-read"
	noteSelected       = "rows-selected-out"
	noteDuplicate      = "duplicate-rows"
	noteClose          = "settings-close"
	noteCLikeK         = "celsius-like-kelvin"
	noteKLikeC         = "kelvin-like-celsius"
	noteFew            = "few-temperatures"
	noteNarrow         = "narrow-range"
	noteLargeU         = "large-uncertainty"
	noteVaries         = "column-varies"
	noteUnneeded       = "assumption-not-needed"
	noteAssumption     = "assumption-made"
	noteConverted      = "unit-converted"

	// Of workbooks.
	noteSheetChosen = "sheet-chosen"
	noteHidden      = "hidden-cells"
	notePercent     = "percent-cells"
	noteMerged      = "merged-cells"
)

// Explanation tells the whole story of a code.
type Explanation struct {
	Code  string
	Title string
	Text  string
	Cure  string // "" where nothing needs to be done
}

var problemTexts = []Explanation{
	{codeReadFailed, "The file could not be read", "The file does not exist, may not be opened, or reading broke off.", "check the name and the rights of the file"},
	{codeNotText, "The file is not a text table", "Tables are text: UTF-8, UTF-16 with a byte order mark, or Windows-1252.", "save the table as CSV (UTF-8)"},
	{codeUnclosedQuote, "A quotation mark is never closed", "A cell begins with a quotation mark and the file ends before the closing one, so that cells cannot be told apart.", "close it, or write the mark twice inside a quoted cell"},
	{codeTooManyColumns, "The table is too wide", "A row has more cells than spreadsheets allow; the file is probably not split at the right mark.", "save only the columns that belong to the data"},
	{codeNoData, "There is no data", "The file holds no table with a heading and rows below it. A file that is meant to hold none, such as readme.txt, is kept out of a survey by --exclude readme.txt.", "write one row of headings such as T/K,k/s^-1 and one row for each measurement"},
	{codeNoHeading, "There are no headings", "Quantities and units are read from the headings; numbers alone never decide a meaning.", "put a row of headings such as T/K,k/s^-1 above the numbers"},
	{codeOnItsSide, "The table lies on its side", "The headings stand in the first column, and each measurement is a column. Rows of measurements under one row of headings are read.", "transpose the table, so that T/K and k/s^-1 stand side by side in its first row (in a spreadsheet: copy, then paste special, transposed), and save it again"},
	{codeDuplicateHeading, "Two columns have the same heading", "It cannot be told which of the two is meant.", "give each column its own heading"},
	{codeRagged, "A row has more or fewer cells than the headings", "A missing or an extra delimiter moves values into other columns.", "give every row as many cells as there are headings, empty ones included"},
	{codeNoTemperature, "There is no temperature column", "No heading was understood as a temperature or a reciprocal temperature. In a survey a line of onebarrier-columns.csv says it, in the folder of the file and below its first line files,heading,role,unit,level: runs-*.csv,bath,T,degC, for a column headed bath.", "write the heading as T/K or t/°C, or name the column with --column"},
	{codeAmbiguousTemperature, "The temperature heading has several meanings", "A heading such as T does not say its unit, and values never decide a meaning. In a survey a line of onebarrier-columns.csv says it, in the folder of the file and below its first line files,heading,role,unit,level: runs-*.csv,T,T,K, for all files of such names.", "write the unit into the heading, T/K, or say which: --assume T=K, T=degC, T=degF"},
	{codeNoRate, "There is no column of rate constants", "No heading was understood as a rate constant, its logarithm, a lifetime or a half-life. In a survey a line of onebarrier-columns.csv says it, in the folder of the file and below its first line files,heading,role,unit,level: runs-*.csv,slope,k,s^-1, for a column headed slope.", "write the heading as k/s^-1, or name the column with --column"},
	{codeAmbiguousRate, "The heading of the rate constants has several meanings", "log may be the natural or the decimal logarithm, a rate need not be a rate constant, k × 10^12 may be read both ways. In a survey a line of onebarrier-columns.csv says it, in the folder of the file and below its first line files,heading,role,unit,level: runs-*.csv,log k,lg k,s^-1, for a decimal logarithm.", "write the heading out, lg(k/s^-1), or say which with --assume"},
	{codeSeveralRates, "There are columns of different rate constants", "One analysis takes one quantity.", "choose one with --column; or, if they are repeats of one measurement, name each, or --assume k=repeats"},
	{codeColumnUnknown, "A column named by a flag is not in the file", "The heading that a flag names is not among the headings.", "copy the heading from the file as it stands"},
	{codeRoleUnknown, "A role named by --column does not exist", "--column takes role=HEADING with a role written as a heading without unit.", "use T, k, ln k, lg k, u(k), U(k), u_r(k), u(ln k), f(k), s(k), u(T), n, limit, source, dataset, order or note"},
	{codeRoleTwice, "--column names one thing twice", "Several columns of rate constants, named each with --column, are repeats of one measurement; other roles have one column.", "name each column and each role once"},
	{codeMixedMarks, "The file mixes decimal points and decimal commas", "One file has one decimal mark; 0.5 beside 0,5 could be two numbers or one.", "write one mark throughout; where the other one only groups thousands, say which is the decimal mark: --decimal point or --decimal comma"},
	{codeAmbiguousMark, "A comma may be a decimal mark or may group thousands", "Every comma stands before exactly three digits, as in 1,234.", "say which: --decimal point or --decimal comma"},
	{codeNotNumber, "A cell is not a number", "A cell of a column that is used holds other text. An empty cell of T or of k leaves its row out; of any other column, such as order, n or u(k), it does not.", "write a number, or leave the cell empty to leave the row out"},
	{codeNotFinite, "A cell holds NaN, an infinity, or a number beyond the range of double precision", "Such a value is no measurement.", "write a finite number, or leave the cell empty to leave the row out"},
	{codeTNotPositive, "A temperature is not above 0 K", "No rate constant was measured at or below absolute zero: the unit, or the cell, is wrong.", "check the cell and the unit in the heading"},
	{codeTFactor, "A power of ten of the temperatures is wrong", "No column of temperatures lies below 1 K, or above 100 000 K where reciprocals are given: the power of ten in the heading is not that of the cells. Temperatures below 1 K are read where the heading says mK.", "correct the power of ten in the heading: 10^3 K/T where the cells are 1000 K/T"},
	{codeKNotPositive, "A rate constant is not positive", "ln k does not exist for k <= 0. Error models additive in k take such points as data.", "leave the row out, write it as a limit (<1e-15), or use --error-model absolute"},
	{codeNegativeU, "An uncertainty is negative", "Uncertainties are positive.", "write it without the sign"},
	{codeBadFactor, "An uncertainty factor is below 1", "f(k) means that k may be f times larger or smaller, so that f is at least 1.", "write 1.2 for 20 %"},
	{codeBadCoverage, "A coverage factor is not positive", "The expanded uncertainty is divided by it.", "write the coverage factor, usually 2"},
	{codeBadRepeats, "A number of repeats is not a whole number of at least 1", "n counts the repeats behind a mean.", "write how many repeats were averaged"},
	{codeBadLimit, "A cell of the limit column is not understood", "The column says whether k is a bound.", "write < or >, or leave the cell empty"},
	{codeUnitConflict, "Units contradict each other", "A unit in a cell, or of an uncertainty, is not that of its heading.", "write one unit, in the heading"},
	{codeDisagree, "Two columns of one quantity disagree", "Several columns give the same quantity, and in this row they differ by more than their rounding.", "correct the row, or choose a column with --column"},
	{codeDatasetUnknown, "There is no such data set", "--dataset names a set that the file does not hold.", "use one of the names listed"},
	{codeWhere, "A condition is not understood", "--where takes a heading, one of = != < <= > >=, and a value. A value is compared as a number where both are numbers, else letter by letter, so that d is not D; a condition that no row meets would leave nothing.", "write --where 'pH=7.0' or --where 'source!=Lab3'"},
	{codeLeaveOut, "A line to be left out is not in the table", "--leave-out takes line numbers of the file, counted from 1, headings and comments included.", "look up the line with inspect"},
	{codeDecimalOption, "The decimal mark is not understood", "--decimal takes comma or point.", "write --decimal comma or --decimal point"},
	{codeAssume, "An assumption is not understood", "--assume takes key=value.", "use T=K|degC|degF, log=lg|ln, k=rate|repeats, factor=times|unit, error=1 (standard), error=2 (expanded, k = 2), error=sd, n=NUMBER"},
	{codePoolTwice, "A file is pooled with itself", "Its rows would count twice.", "name each file once"},
	{codePoolQuantity, "Files of different rate constants cannot be pooled", "Pooled rows are taken as measurements of one quantity, and its symbol says which.", "assess them apart; or write the same symbol into the headings if the quantity is the same"},
	{codePoolUnit, "The units of pooled files cannot be converted into each other", "Pooled rows are brought to the unit of the first file. Units of different dimensions have no ratio, nor has a unit that was not understood.", "write the rate constants in one unit"},
	{codeTidyCell, "A cell of a tidy table is not understood", "A table with the headings row and left_out was written by inspect --tidy: row holds the line of the original file, level says standard or repeats.", "write it as --tidy does, or rename the two headings"},
	{codeDatasetScattered, "The rows of a data set do not follow one another", "A long table is read data set by data set, so that memory does not grow with it; a name that comes again after other data sets would give two halves.", "sort the table by its column dataset, or cut it into tables of less than 32 MB"},
	{codeBelowBlank, "Rows below a blank row were not read", "A table ends where something else than its rows follows a blank row. In a table of many data sets, what stands below may be some of them.", "if measurements follow, delete what stands between them and the table"},
	{codeTooLong, "Too many rows for one data set", "A table is read as a whole where no column dataset divides it, or where it is not UTF-8; a data set of a million rows is none that could be assessed.", "add a column dataset and save the table as UTF-8, or name its column with --dataset-by"},
	{codeColumnsFile, "The file that settles headings is not understood", "onebarrier-columns.csv has the headings files,heading,role,unit,level, and below them a line for each heading that it settles. The files of its folder are read without it.", "correct the line, or delete the file"},
	{codeInternalError, "A fault of the program", "The program failed on this data set; the others are not touched.", "report it with the data set"},
	{codeWorkbookDamaged, "The workbook is damaged", "A part of the file is missing, ends early or fails its checksum. What is left is not read, lest rows be lost unseen.", "open it in a spreadsheet program and save it again as .xlsx, or save the sheet as CSV"},
	{codeWorkbookTooLarge, "The workbook unfolds to too much", "A workbook may unfold to 200 times its size, 64 MB at least and 2 GB at most; beyond that it is taken for one made to fill memory.", "save the sheet as CSV"},
	{codeWorkbookEncrypted, "The workbook is protected by a password", "Its cells are encrypted.", "save it without a password, or save the sheet as CSV"},
	{codeWorkbookFormat, "The workbook is of a kind that is not read", "Of workbooks, .xlsx is read; .xls, .xlsb and .ods are not.", "save it as .xlsx, or save the sheet as CSV"},
	{codeSeveralSheets, "Several sheets hold a table", "One analysis takes one table.", "choose one: --sheet NAME"},
	{codeSheetUnknown, "There is no such sheet", "--sheet takes the name of a sheet, or its number counted from 1. A text table has no sheets.", "use one of the names listed"},
	{codeScattered, "The cells lie far apart", "A few cells lie in distant columns of many rows; filling in what lies between would take more memory than the data.", "save only the columns that belong to the data, next to each other"},
	{codeDateCell, "A cell that should hold a number holds a date", "Spreadsheet programs turn entries such as 1-2 or 3/4 into dates; what was typed is lost. A date format may also have been given to a column of numbers.", "type the number anew in a cell of the format Number, or give the column that format"},
	{codeFormula, "A formula has no stored result", "Programs that write workbooks often leave formulas to be computed when the file is opened. Formulas are not computed here.", "open the workbook in a spreadsheet program and save it"},
}

var noticeTexts = []Explanation{
	{noteEncoding, "The file was read as Windows-1252", "Its bytes are not UTF-8 and it has no byte order mark. Signs such as ° and µ may have been meant otherwise.", "save the file as UTF-8 if signs look wrong"},
	{noteTitle, "Lines above the headings were skipped", "A line with one cell only, above the headings, is a title.", ""},
	{noteJoined, "Two heading rows were joined", "The row below the headings holds units or words and no number.", ""},
	{noteCommentHeading, "The headings were read from a comment", "The first row holds numbers only, and the comment above it reads as headings.", "write the headings without #"},
	{noteLost, "A number was read as a power of ten", "An export lost a superscript: 103 or 10-12 in a heading is 10^3 or 10^-12.", "write the power with its sign: 10^3 or 10^-12"},
	{noteKept, "Columns were kept but not used", "Their headings are none that take part in the analysis.", "name the role of a column with --column if it should take part"},
	{noteUnit, "The unit of the rate constants is not understood", "Everything that does not depend on the unit is computed; conversions, ΔS‡ and ΔG‡ are withheld.", "write the unit as in k/s^-1 or k/(L mol^-1 s^-1)"},
	{noteUnitWithheld, "The unit has no standard concentration in mol/L", "Rate constants per pressure, mass or surface cannot be turned into per second and mol/L without more knowledge; ΔS‡ and ΔG‡ are withheld.", ""},
	{noteTimeLike, "A time was read as a rate constant", "A lifetime τ is read as k = 1/τ, a half-life as k = ln 2/t½. Both hold for first-order decay.", "give k itself if the decay is not of first order"},
	{noteSeveral, "Several columns give one quantity", "The one with the smallest rounding error is used; the others agree with it within rounding.", ""},
	{noteGap, "Kelvin and Celsius columns differ by 273", "T/K is t/°C + 273 in every row, not + 273.15: the Celsius column is used.", "correct the kelvin column"},
	{noteSideBySide, "Repeats stand side by side", "Several columns hold repeats of one measurement. Each cell is a point of its own, at the temperature of its row.", ""},
	{noteSpareMean, "What sums up the repeats was not used", "A mean, its standard error, the standard deviation or the number of repeats stands beside the repeats themselves, which say the same and more.", ""},
	{noteWhichRepeat, "An uncertainty was not used: it is not said of which repeat", "Several columns hold repeats, and the heading of the uncertainty names none of them.", "write the mark of its repeat into the heading, as in u(k)/s^-1 (run 1)"},
	{noteAssumedUnit, "A column without unit was given the unit of its quantity", "The heading of an uncertainty, or of one of several columns of k, names no unit.", "write the unit into its heading"},
	{noteLevel, "An uncertainty was not used", "Its level is not stated: error or ± may be a standard uncertainty, twice that, or a standard deviation of repeats; a bracket after a space may be anything.", "say what it is: --assume error=1 (standard), error=2 (expanded, k = 2) or error=sd,n=3"},
	{noteRepeats, "A standard deviation without the number of repeats was not used", "The uncertainty of a mean is s/sqrt(n).", "add a column n, or --assume n=3"},
	{noteOtherU, "More than one uncertainty of one quantity", "The first one at a known level is used.", ""},
	{noteBrackets, "Brackets hold standard uncertainties", "12.3(4) means u = 0.4 (GUM 7.2.2).", ""},
	{noteFewRepeats, "Uncertainties come from few repeats", "A standard deviation from 30 repeats or fewer is not a known uncertainty; k is taken as a mean.", ""},
	{noteMissing, "Rows without a value were left out", "The temperature or the rate constant is empty, n.d., NA, a dash or a spreadsheet error.", ""},
	{noteLimits, "Limits", "Rows that state only a bound are no measured k; an assessment takes them as the probability of their side of the bound. Where one cannot enter, such as one of a source that measured nothing else, assess says so (limits-left-out).", ""},
	{noteAfter, "Rows below the table were not read", "Rows of words below a blank row, or labelled mean, SD, slope and the like, are no measurements, nor are the lines of words that end a table, such as * mean of two titrations.", "delete the blank row if measurements follow it"},
	{noteGoesOn, "The table goes on below a blank row", "Rows below a blank one belong to the table where they read as its rows do: a temperature, and a rate constant or none, under the same headings. Measurements of another rate constant belong in a file of their own.", ""},
	{noteNotRead, "Numbers below the table were not read", "A table ends where something else than its rows follows a blank row: headings of another table, words, numbers that are no temperatures. Rows of numbers from there on are counted as left out.", "if they belong to the table, delete what stands between them and it; if they are another table, save it as a file of its own"},
	{noteSelected, "Rows were left out on request", "--where, --leave-out, --t-min or --t-max left them out.", ""},
	{noteDuplicate, "Rows are the same", "The same temperature and rate constant occur more than once: repeats that agree to all digits, or a row copied twice.", "--leave-out the copies if they are no separate measurements"},
	{noteClose, "Two temperatures lie far closer than the others", "Temperatures count as one setting where they are equal. Two that differ by less than 0.2 K, and by less than a tenth of what lies between settings otherwise (the median gap), are more likely one setting of which a cell was rounded otherwise, converted from another unit or converted with 273 in place of 273.15. Taken as two they count as two temperatures, are no repeats of each other, and give an E between them that says nothing. Temperatures that were measured anew for each run, and so differ everywhere, are not meant.", "if they are one setting, write one temperature for both; if not, nothing is to be done"},
	{noteCLikeK, "Temperatures in °C look like kelvin", "All lie where room-temperature work in kelvin lies. They are read as °C, as the heading says.", "correct the heading if they are kelvin"},
	{noteKLikeC, "Temperatures in K look like °C", "All lie between 0 and 120. They are read as kelvin, as the heading says.", "correct the heading if they are degrees Celsius"},
	{noteFew, "Fewer than five temperatures", "With four temperatures one degree of freedom is left to judge curvature by, with three none.", "measure at more temperatures"},
	{noteNarrow, "The range of temperatures is under 20 K", "Over a narrow range E is uncertain and curvature cannot be seen.", "measure over a wider range"},
	{noteLargeU, "Relative uncertainties exceed 0.3", "The distribution of ln k is then not normal.", "consider --error-model stated-absolute"},
	{noteVaries, "Another condition varies", "A numeric column takes several values at one temperature: the rows may not belong to one data set.", "choose with --where 'HEADING=VALUE', or split with --dataset-by HEADING"},
	{noteUnneeded, "An assumption was not needed", "No heading or cell is ambiguous in the way that --assume settles.", ""},
	{noteAssumption, "An assumption was made on request", "--assume settled what the file leaves open.", ""},
	{noteConverted, "Rate constants were converted to the unit of another file", "Files that are pooled are brought to the unit of the first, by the exact ratio of the units.", ""},
	{noteSheetChosen, "One sheet of several was read", "The other sheets hold no table with a temperature and a rate constant.", ""},
	{noteHidden, "Hidden cells were read", "Rows, columns or sheets that are hidden, or filtered out, belong to the file like all others.", "--leave-out rows that are not meant, or delete them"},
	{notePercent, "Cells shown in per cent were read as such", "A cell that holds 0.05 and shows 5 % is 5 %.", ""},
	{noteMerged, "Merged cells were read as repeated", "The value of a merged heading belongs to each of its columns, that of a merged cell in the data to each of its rows.", ""},
}

// ProblemCodes lists the codes of problems, NoticeCodes those of notices.
var (
	ProblemCodes = codesOf(problemTexts)
	NoticeCodes  = codesOf(noticeTexts)
)

func codesOf(texts []Explanation) []string {
	var codes []string
	for _, e := range texts {
		codes = append(codes, e.Code)
	}
	return codes
}

// Explanations returns every code of this package with its explanation.
func Explanations() map[string]Explanation {
	m := map[string]Explanation{}
	for _, texts := range [][]Explanation{problemTexts, noticeTexts} {
		for _, e := range texts {
			m[e.Code] = e
		}
	}
	return m
}

// problem makes a problem whose cure is that of its code.
func problem(code, file string, row int, column, message string) Problem {
	return Problem{Code: code, File: file, Row: row, Column: column, Message: message, Cure: cureOf(problemTexts, code)}
}

// notice makes a notice whose cure is that of its code.
func notice(code, message string, rows ...int) Notice {
	return Notice{Code: code, Message: message, Cure: cureOf(noticeTexts, code), Rows: rows}
}

func cureOf(texts []Explanation, code string) string {
	for _, e := range texts {
		if e.Code == code {
			return e.Cure
		}
	}
	panic("dataset: no explanation of code " + code)
}
