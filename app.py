"""The browser application: page settings and navigation, nothing else."""

import streamlit as st

st.set_page_config(page_title="Energy Concordance", page_icon="⚖️", layout="wide")
st.navigation(
    [
        st.Page("energy/pages/bench.py", title="Bench", url_path="bench", default=True),
        st.Page("energy/pages/sample.py", title="Sample", url_path="sample"),
        st.Page("energy/pages/bomb_runs.py", title="Bomb runs", url_path="bomb-runs"),
        st.Page("energy/pages/calorimeter.py", title="Calorimeter", url_path="calorimeter"),
        st.Page("energy/pages/declared.py", title="Declared values", url_path="declared-values"),
        st.Page("energy/pages/equations.py", title="Equations", url_path="equations"),
    ],
    position="top",
).run()
