"""Pictures for papers and pages, by matplotlib."""
