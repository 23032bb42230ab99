"""Everything Jinja renders; shipped inside the wheel as ``tbkit.templates``."""
