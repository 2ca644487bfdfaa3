"""The problem document as rows of a form, and back: the table of sections, the reader, the filler, the row commands."""
