"""One self-contained HTML page about a run: what was found, when, and whom the watch suspected.

The history is kept without the plotting library; `page` needs it, and with it the extra ``report``.
"""
