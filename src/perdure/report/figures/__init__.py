"""Pictures of the page, one file a kind; each function turns rows into a :class:`~perdure.report.figures.canvas.Picture`."""
