// Package export holds what leaves the house and what enters it: the auditor's workbook, the label sheets, and the
// register read from CSV. It writes to an io.Writer from values or an iter.Seq2, reads from an io.Reader, opens no
// files and knows no HTTP. Text in a workbook is always text: nothing that a person typed can run as a formula.
package export
