"""The model as plain arrays: margins, reasons, doubt, novelty and the bundle on disk."""
