"""Control charts of a scanner, a camera or a staining run."""
