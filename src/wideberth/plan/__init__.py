"""Planning the runs: designs, their safety, their quality, optimal runs, run sheets, stages."""
