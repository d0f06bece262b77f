"""What a run is handed over as: rows of layers, styles, metadata, projects."""
