"""Declared values: what a law computes, how it rounds, what it bears, and how sure we are; products from recipes."""

from __future__ import annotations

from typing import Any

import streamlit as st

from energy.assessment import Assessment
from energy.conformity import DECISION_RULES
from energy.declare import PER_WORDS, Declared, Lot
from energy.pages import drawing, session
from energy.problems import EnergyError, StructuralProblems
from energy.recipe import Mixed
from energy.report import label_work, recipe_work, screen


def choices(target: str) -> tuple[str, dict[str, Any]]:
    """Law, decision rule, the amount the label speaks of, and what is known of the lot."""
    laws = {label_work.ALL: "all of them, side by side", **label_work.laws(target)}
    one, two, three, four = st.columns([4, 4, 2, 2])
    kept = st.session_state.get("declared_law", session.setting("law"))
    law = one.selectbox("Law", list(laws), index=list(laws).index(kept) if kept in laws else 0, format_func=lambda i: laws[i],
                        key=f"declared_law_{target}")  # fmt: skip
    st.session_state["declared_law"] = law
    decision = two.selectbox("Decision rule, chosen beforehand", list(DECISION_RULES), format_func=lambda r: DECISION_RULES[r],
                             key="declared_rule")  # fmt: skip
    per = three.selectbox("Label speaks of", list(PER_WORDS), format_func=lambda p: PER_WORDS[p], key="declared_per")
    serving = four.number_input(
        "Serving, g", min_value=1.0, value=30.0, disabled=per != "serving", key="declared_serving"
    )
    lot = None
    with st.expander("Speak of the lot instead of the sample tested"):
        st.caption(
            "Only where the scatter of drawing the sample and from unit to unit is known, as relative standard deviations."
        )
        a, b, c = st.columns(3)
        sampling = a.number_input("Sampling, %", min_value=0.0, value=0.0, key="declared_sampling")
        production = b.number_input("From unit to unit, %", min_value=0.0, value=0.0, key="declared_production")
        units = c.number_input("Units in the sample", min_value=1, value=1, key="declared_units")
        if sampling > 0 and production > 0:
            lot = Lot(label_work.share(sampling), label_work.share(production), int(units))
        elif sampling > 0 or production > 0:
            st.warning("Both are needed: until then the verdict is about the sample tested.")
    return law, {"decision": decision, "per": per, "serving": serving if per == "serving" else None, "lot": lot}


def verdicts(a: Assessment, found: list[Declared]) -> None:
    """Samples under one law, or all laws side by side."""
    if len(found) == 1:
        d = found[0]
        st.markdown(screen.plain(label_work.headline(d)))
        table = label_work.judged_table(a, d)
        st.dataframe(table.style.apply(drawing.outcome_styles, subset=["verdict"]), hide_index=True, width="stretch")
        st.caption(f"{label_work.LEGEND} {label_work.capital(d.bomb)}.")
    else:
        table = label_work.side_by_side(a, found)
        st.dataframe(
            table.style.apply(drawing.outcome_styles, subset=list(table.columns[1:])), hide_index=True, width="stretch"
        )
        st.caption(label_work.LEGEND)
    st.caption(label_work.ROUTE)


def to_print(a: Assessment, found: list[Declared]) -> None:
    """The figures to print, with the sum that leads to them."""
    st.subheader("To print", anchor=False)
    table = label_work.proposal_table(a, found)
    if len(table):
        st.dataframe(table, hide_index=True, width="stretch")
    else:
        st.markdown("Nothing can be computed from what is given.")


def rules(found: list[Declared]) -> None:
    """Article and paragraph of everything used."""
    st.subheader("What the law says", anchor=False)
    st.table(screen.safe(label_work.rules_table(found)), hide_index=True)


def recipes(law: str, wishes: dict[str, Any]) -> None:
    """Products from two tables: recipes and ingredients."""
    st.subheader("From recipes", anchor=False)
    left, right = st.columns(2)
    products = left.file_uploader("Recipes: product, ingredient, amount [g], cooking yield [%], moisture loss [%]",
                                  ["csv", "xlsx", "parquet"], key="recipes_upload")  # fmt: skip
    parts = right.file_uploader("Ingredients: a sample table, sample_id as the recipes name them",
                                ["csv", "xlsx", "parquet"], key="ingredients_upload")  # fmt: skip
    try:
        if products is not None and parts is not None:
            m = recipe_work.made(products.getvalue(), parts.getvalue(), products.name, parts.name)
        else:
            if products is not None or parts is not None:
                st.info("Both tables are needed. Until then the invented demo is shown.")
            else:
                st.info("Invented demo recipes: no real product.")
            m = recipe_work.made(*recipe_work.demo(), "recipe_products.csv", "recipe_ingredients.csv")
        made(m, law, wishes)
    except StructuralProblems as problems:
        st.error("The recipes cannot be used yet.")
        session.problem_list(problems.problems)
    except EnergyError as problem:
        st.error(str(problem))


def made(m: Mixed, law: str, wishes: dict[str, Any]) -> None:
    """Mass balance, composition and label figures of products."""
    st.markdown("**What goes in and what comes out, g per 100 g of ingredients**")
    st.table(screen.safe(recipe_work.balance(m)), hide_index=True)
    st.markdown("**What the products hold**")
    st.dataframe(recipe_work.composition(m), hide_index=True, width="stretch")
    for text in m.assumed:
        st.caption(screen.plain(label_work.capital(text)) + "\\.")
    if m.problems:
        session.problem_list(m.problems)
    product = st.selectbox("What each ingredient brings to", [str(p) for p in m.recipes.products], key="recipe_product")
    with st.expander(f"Ingredients of {product}"):
        st.dataframe(recipe_work.brings(m, product), hide_index=True, width="stretch")
    st.markdown("**Energy to print**")
    st.dataframe(recipe_work.labels(m, law, **{**wishes, "lot": None}), hide_index=True, width="stretch")
    st.caption("Low and high: every figure below its limit at nothing and at the limit itself.")


session.opening("Declared values", "May the label stand: what a law computes, rounds and bears, and how sure we are.")
st.warning(label_work.CAUTION)
assessment = session.current()
if assessment is not None:
    if session.source()["demo"]:
        st.info("Invented demo data: no real food, feed, maker or laboratory.")
    if not label_work.laws(assessment.target):
        st.info("No law at hand has a formula for this species or use: there is nothing to declare by.")
    else:
        law, wishes = choices(assessment.target)
        try:
            found = label_work.judge(assessment.samples, assessment.target, law, **wishes)
            verdicts(assessment, found)
            to_print(assessment, found)
            rules(found)
        except EnergyError as problem:
            st.error(str(problem))
        if assessment.target == "human":
            recipes(law, wishes)
session.footer()
