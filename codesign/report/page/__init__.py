"""The report as one HTML file: `document` puts it together, `html` holds the only way from text to markup."""
