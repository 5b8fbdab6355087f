"""An appraisal as a document: one self-contained HTML page, offline, printable, that a laboratory director can sign."""
