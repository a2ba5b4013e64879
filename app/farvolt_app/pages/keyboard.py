"""The keys of undo and redo: in a field that is being typed in they are the field's own, elsewhere the plan's."""

import streamlit as st

# At the window, on the way down: the shortcuts of buttons listen further down and never hear of it.
_SCRIPT = """<script>
if (!window.farvoltKeys) {
  window.farvoltKeys = true;
  window.addEventListener("keydown", event => {
    const typed = event.target.closest?.("input:not([type=checkbox]):not([type=radio]), textarea, [contenteditable]");
    if ((event.ctrlKey || event.metaKey) && /^[zy]$/i.test(event.key) && typed) event.stopImmediatePropagation();
  }, true);
}
</script>"""


def show() -> None:
    """Add the listener to the page, once. The script is a constant: nothing of a plan gets into it."""
    st.html(_SCRIPT, unsafe_allow_javascript=True, width="content")
