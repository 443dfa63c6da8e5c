"""The evidence: what is known from outside beside what stillfield computes, remade on request.

Nothing in here is used by a run. Formulas that are known to be poor, such as a textbook's cubic for the vapour
pressure, are written out here where a printed example needs them, and nowhere else.
"""
