"""Programs: typed statements for one number format."""
