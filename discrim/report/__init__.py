"""The report: what to say (`content`, `tables`), and how it looks (`text`, `html`, `figures`).

Everything is drawn from the one document that is saved as ``evidence.json``.
"""
