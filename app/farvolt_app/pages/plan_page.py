"""The page "Plan": the tables to edit, and under them what every load and cable run sees."""

from farvolt_app.pages import editor, results

editor.show()
results.show()
