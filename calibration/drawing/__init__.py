"""The marks of a test and the large plots, as SVG."""
