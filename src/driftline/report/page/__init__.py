"""`report.html`: one self-contained page for the group meeting.

`document` puts it together; `sections` says what stands in it, `details` holds the tables only the page has, `limits`
what the result does not show, `pictures` the figures, `panel` the interactive collapse, `elements` and `symbols` how
things become HTML.  The style sheet and the scripts are files beside them.
"""

from driftline.report.page.document import Page, page

__all__ = ["Page", "page"]
