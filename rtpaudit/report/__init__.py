"""Report: assessed calls and findings come in; tables, sound and one document of it all go out."""
