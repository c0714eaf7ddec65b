"""Where to cut: directions that answer a question, what a miscut costs, sightings, stage settings."""
