"""The report of a compared campaign: bottom line, tables and figures, written into one folder.

    rule            the rule of the bottom line, in words that the report prints
    bottom_line     the bottom line, from `spread_line` and `kept_line`; each is an `axis_line`
    curves          quantities against depth with a band, and where they cross a level
    spreading       what the spread axis rests on; `path` joins it with the kept axis
    locate          couplers that the reference echoes point to
    *_table         tables, each a `table.Table`, ready for HTML, Markdown, LaTeX and CSV
    figure_*        figures, one module a kind; `figures` holds their looks
    source          the folder that a comparison left, read once
    page            the layouts of `reports/` and their escaping
    write           puts all of it together: `write_report`, `bottom_line_text`

To change what a report says, edit the layouts of `reports/`; to add a table or a figure, add a module here and one
line in `write`.
"""
