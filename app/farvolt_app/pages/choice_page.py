"""The page "Cable choice": all cables chosen at once, why, beside what else there is, and into the draft."""

import streamlit as st

from farvolt import price_file
from farvolt.choice_compared import compared
from farvolt.choice_conflict import conflict
from farvolt.choice_curve import Point, curve
from farvolt.choice_options import Wishes
from farvolt.choose import Choice, Progress, choose
from farvolt.errors import FarvoltError
from farvolt.results import Study
from farvolt_app import choice_command, choice_edits, choice_rows, choice_text, shown
from farvolt_app.pages import results, state
from farvolt_app.shown import plain

FREE, EVERY = "Runs without a size", "All runs"
METAL, PRICE = "Least metal", "Least price"


def show(study: Study) -> None:
    """Draw the wishes, and below them what was chosen last for this plan."""
    st.caption(
        "Chosen together, so that every load and every check is satisfied at the least metal or price. What is chosen "
        "has been held against the exact solution and all checks."
    )
    try:
        wishes = _wishes()
    except FarvoltError as error:
        st.error(plain(str(error)))
        return
    with st.container(horizontal=True):
        if st.button("Choose the cables", type="primary", key="choose"):
            _choose(study, wishes)
        if st.button("What the limits of drop cost", key="choice_curve", help="A choice at each of several limits."):
            _curve(study, wishes)
    found: Choice | None = st.session_state.get("choice")
    if found is not None and found.plan == study.plan:
        _answer(found)
    points: list[Point] = st.session_state.get("choice_points", [])
    if points and st.session_state.get("choice_points_of") == study.plan:
        st.markdown("#### What the limits of drop cost")
        results.table(choice_rows.curve_rows(points), "choice_points_table", "Cost by limit of drop")
        st.line_chart([{"factor": one.factor, "cost": one.cost} for one in points], x="factor", y="cost",
                      x_label="Times the limits of drop", y_label="Cost", width=640)  # fmt: skip
    st.caption(plain(shown.CAUTION))


def _wishes() -> Wishes:
    with st.container(horizontal=True, vertical_alignment="bottom"):
        which = st.selectbox("Which", [FREE, EVERY], key="choice_which", width=220)
        aim = st.selectbox("By", [METAL, PRICE], key="choice_aim", width=160,
                           help="Prices are invented; the command line takes a price list of your own.")  # fmt: skip
        stock = st.text_input("Sizes in stock", key="choice_stock", placeholder="all that are made", width=260)
        most = st.number_input("Different sizes at most", 0, 30, 0, key="choice_most", width=180,
                               help="0: any number.")  # fmt: skip
        seconds = st.number_input("Seconds to search", 1, 600, 30, key="choice_seconds", width=160)
    prices = price_file.example() if aim == PRICE else None
    return Wishes(
        objective="cost" if prices is not None else "mass", prices=prices,
        sizes=choice_command.stock(stock) if stock.strip() else (), most_sizes=int(most) or None,
        runs="all" if which == EVERY else "free", time_limit_s=float(seconds),
    )  # fmt: skip


def _choose(study: Study, wishes: Wishes) -> None:
    with st.status("Choosing …") as status:

        def report(progress: Progress) -> None:
            status.update(label=plain(choice_command.told(progress)))

        try:
            st.session_state["choice"] = choose(study.plan, study.rulebook, wishes, report)
            status.update(label="Chosen", state="complete")
        except FarvoltError as error:
            status.update(label=plain(str(error)), state="error")


def _curve(study: Study, wishes: Wishes) -> None:
    points: list[Point] = []
    bar = st.progress(0.0, "Choosing at several limits of drop …")
    try:
        for place, point in enumerate(curve(study.plan, study.rulebook, wishes), start=1):
            points.append(point)
            bar.progress(min(place / 7, 1.0), f"At {point.factor:g} times the limits of drop …")
    except FarvoltError as error:
        st.error(plain(str(error)))
    st.session_state["choice_points"], st.session_state["choice_points_of"] = points, study.plan
    bar.empty()


def _answer(choice: Choice) -> None:
    for line in choice_text.verdict(choice).splitlines():
        st.markdown(plain(line))
    told = conflict(choice)
    if told is not None:
        st.markdown("**Cannot be met together**")
        for line in told.limits:
            st.markdown(f"- {plain(line)}")
        st.markdown("**What would open it**")
        for line in told.openings or ("none of the changes that were tried",):
            st.markdown(f"- {plain(line)}")
    if choice.picked is not None:
        results.table(choice_rows.run_rows(choice), "choice_runs", "Each cable run chosen, and why", tall=True)
        if st.button("Take the choice into the plan", key="choice_apply", on_click=_apply, args=(choice,)):
            st.success("The sizes are in the plan now; its text keeps its comments. It can be undone.")
    st.markdown("#### Compared")
    results.table(choice_rows.compared_rows(compared(choice)), "choice_compared", "The choice beside others")
    for rule, subject in sorted(choice.aside):
        st.caption(plain(f'Not for cable to cure: {rule} of "{subject}"'))


def _apply(choice: Choice) -> None:
    draft = state.draft()
    try:
        state.put(draft.edit(choice_edits.applied(draft.text, choice)))
    except FarvoltError as error:
        state.say(str(error))


if (found := results.study()) is not None:
    show(found)
