"""From the bytes of a file to a table of text: kind of file, encoding, separator, titles, headings; nothing is interpreted yet."""
