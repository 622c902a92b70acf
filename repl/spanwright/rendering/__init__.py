"""Values as text (parses back), TeX, JSON, HTML; one file each."""
