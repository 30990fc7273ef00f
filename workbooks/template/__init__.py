"""What a template holds besides its columns: charts, other sheets, how it looks."""
