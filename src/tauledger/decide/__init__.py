"""From answer to decision: what tolerances, temperature and stress do, and which part to fit.

``spread``, ``choose``, ``stress`` and ``temperature`` each give plain result rows; ``bench``
measures gain and exact corners of many boards at once for all of them.
"""
