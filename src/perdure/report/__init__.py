"""The reviewer's page: sections, figures, tables, page. Reads result files, computes no statistics.

Nothing is imported here, so that ``import perdure.report`` costs nothing; the entry point is :func:`perdure.report.page.render`.
"""
