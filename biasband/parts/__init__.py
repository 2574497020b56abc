"""Parts that can be bought: preferred series, marking codes, derating. No file is read here."""
