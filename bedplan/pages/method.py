"""Method and cautions: what each line on the picture computes, where it comes from, and what it leaves out."""

from __future__ import annotations

import streamlit as st

from bedplan import wording

METHODS = {
    "average_occupancy": "Admissions × mean stay ÷ 365 ÷ 85 %. Leaves chance out: as a line it turns nobody away while beds "
    "exceed the average load. Farmer & Emami 1990; common practice.",
    "erlang_loss": "Erlang's loss formula (1917) at the year's mean load: independent arrivals at one steady rate, patients "
    "who find the ward full go elsewhere. The spread of stay does not matter to it. de Bruin et al. 2010.",
    "unlimited_beds": "Patients who want a bed if nobody were ever turned away, hour by hour through the year: a Poisson "
    "number about the load, patients in groups by their own law, booked lists patient by "
    "patient. Eick, Massey & Whitt 1993. It answers for wards whose patients wait or are placed elsewhere.",
    "seasonal_loss": "Patients who find the ward full go elsewhere, hour by hour through the week at each month's level of "
    "demand, with the delay that stays cause: a chain of the ward's beds near the decision, Erlang's formula on the load of "
    "each hour elsewhere. Massey & Whitt 1994; patients in groups by a chain of the beds, smooth arrivals by Fredericks 1980; "
    "its note says how far it may err.",
    "waiting": "Patients wait for a bed instead of leaving, and the queue carries over: Erlang's delay formula (1917), "
    "corrected for the spread of stay by Allen & Cunneen, at each rate that is likely; through weeks and busy months the queue is "
    "followed hour by hour. Where the load reaches the beds the queue only grows. Its note says how far it may err.",
}

FROM_RECORDS = {
    "Rows": "Every row of a file is used, repaired by a rule that is named, or set aside with its reason; the page Records "
    "shows the answer with and without the repaired ones.",
    "Stay": "The product limit: patients still in count for as long as they were seen, those in before the file begins from "
    "that day on. The mean is never taken from a fitted curve. Kaplan & Meier 1958; Klein & Moeschberger 2003.",
    "Rhythm and growth": "One Poisson regression on months, weekdays and trend, drawn towards no effect by what chance "
    "explains. Nelder & Wedderburn 1972; Efron & Morris 1975. Growth is of bed-days, by how long patients have been in.",
    "Swing": "Patients who come together raise variance ÷ mean around a level of 28 days; what is slower is drift, found by "
    "residual likelihood. Patterson & Thompson 1971. The two are never counted twice.",
    "Hidden demand": "Lists of those not given a bed; arrivals while a bed was free (Wolff 1982); Erlang's loss formula solved "
    "for its load; a specialty's patients on every ward. The page shows which of "
    "them the files allow and how far apart they lie. Where patients queue for a ward, the second and third are refused.",
    "Next years": "That regression, or singular spectrum analysis where it did better on the file's own past (Golyandina and "
    "others 2001). Ranges come from how wrong such forecasts were, and widen with the years.",
    "Check on last year": "Each month of the last year is foretold from the days before it alone, and held against what came: "
    "days inside the bands, and the ranked probability score (Gneiting & Raftery 2007; Czado, Gneiting & Held 2009).",
}

st.header("What each line computes, and what it leaves out", anchor=False)
for model, line in wording.LINES.items():
    if model in METHODS:
        st.markdown(f"**{line.capitalize()}.** {METHODS[model]}")
st.subheader("From records to demand", anchor=False)
for step, method in FROM_RECORDS.items():
    st.markdown(f"**{step}.** {method}")
st.subheader("Words", anchor=False)
st.markdown(
    "- **Arrivals** need a bed; **admissions** got one. Records hold admissions only.\n"
    "- **Beds wanted** on average: arrivals a day × mean stay in days.\n"
    "- **Turned away**: wanted this ward, did not get it. **Finds the ward full**: came when every bed was taken, and waited "
    "or was placed elsewhere.\n"
    "- **Occupancy** is what results from a bed count, not a target. *Running* with 85 % of beds in use, 10 beds turn away "
    "33 % of patients, 30 beds 11 %, 200 beds 0.25 %; *sized* at 85 % of demand they turn away 14 %, 6 % and 0.2 %."
)
st.subheader("Cautions", anchor=False)
for caution in wording.CAUTIONS:
    st.markdown(f"- {caution}")
st.subheader("Privacy", anchor=False)
st.markdown(
    "Patient rows stay in this computer's memory and are forgotten when the page is closed. Names, dates of birth, addresses "
    "and numbers that identify people are dropped as a file is read. No row is in a link, a log or a document."
)
