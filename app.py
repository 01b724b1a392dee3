"""The dashboard's front door: which pages there are. Start it with ``streamlit run app.py``."""

import streamlit as st

from bedplan.pages import address, startup

assert startup.LOADED  # noqa: S101  imported for what it does once a process
st.set_page_config(page_title="bedplan", layout="wide")
page = st.navigation(
    [
        st.Page("bedplan/pages/records.py", title="Records", url_path="records"),
        st.Page("bedplan/pages/what_happened.py", title="What happened", url_path="what-happened"),
        st.Page("bedplan/pages/hidden.py", title="Hidden demand", url_path="hidden-demand"),
        st.Page("bedplan/pages/one_ward.py", title="One ward", default=True),
        st.Page("bedplan/pages/compare.py", title="Compare wards", url_path="compare"),
        st.Page("bedplan/pages/justification.py", title="Justification", url_path="justification"),
        st.Page("bedplan/pages/method.py", title="Method and cautions", url_path="method"),
    ],
    position="top",
)
on_one_ward = page.url_path == ""
address.take_up()
page.run()
address.keep(on_one_ward=on_one_ward)
