"""Pictures and the page a person reads.

``write`` makes ``report.html`` and the PNG pictures of a run; ``draw_section`` draws a lens on any
matplotlib axes.  matplotlib and jinja2 load with the first call, not with the import.
"""


def write(folder, result, log_rows, section, rays):
    """Write the report of one run; see ``inverse.report.page.write``."""
    from inverse.report import page

    return page.write(folder, result, log_rows, section, rays)


def draw_section(ax, section, rays=None, emitter=None, *, labels=True):
    """Draw a lens section with its LED and rays; see ``inverse.report.section_figure.draw_section``."""
    from inverse.report import section_figure

    return section_figure.draw_section(ax, section, rays, emitter, labels=labels)
