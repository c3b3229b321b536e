"""The page: one self-contained HTML file about one design, the same in Markdown, and its figures as files.

Data flows from :mod:`~realize.page.job` (what is known of a design) over :mod:`~realize.page.curves` (numbers of each
figure), :mod:`~realize.page.plots` (their drawing) and :mod:`~realize.page.sections` (what is said in which order) to
:mod:`~realize.page.html` and :mod:`~realize.page.markdown`.
"""
