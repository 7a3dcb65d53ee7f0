"""What drives the job: model, analysis, engine, and the command line on top."""
