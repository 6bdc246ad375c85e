"""The forecaster's page: one HTML file that shows the hours of a folder and asks nothing of anyone.

Python packs the hours, lays out the figures (Bokeh) and writes the file; the files ``*.js`` beside
the modules run in the browser. Names from files reach the browser as JSON, and the page as text,
never as HTML.
"""

from fieldgen.products.page.file import write_page

__all__ = ["write_page"]
