"""The print-ready report of a study: one HTML document without a script."""
