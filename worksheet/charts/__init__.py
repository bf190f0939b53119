"""Chart descriptions as plain data, and their two renderers: Plotly for the page, print for the PDF."""
