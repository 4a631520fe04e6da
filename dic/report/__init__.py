"""The report: a page for people, with its figures."""

import lazy_loader as _lazy

# matplotlib takes a moment to import, so it is left until a report is asked for.
__getattr__, __dir__, __all__ = _lazy.attach(__name__, submod_attrs={"page": ["write_report"]})
