"""What a person opens: figures, and the record that the summary table and diagnostics.json are made of."""
