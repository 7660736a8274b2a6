"""The caution that every page, file and screen of Brasscap carries, in one place so that it cannot be forgotten."""

CAUTION = (
    "This is a computation record, not a professional statement: it does not replace a licensed surveyor's judgement "
    "and sign-off. Least squares does not decide where a boundary is. Check datum, units and local rules."
)

CAUTION_SHORT = "A computation, not a professional statement: a licensed surveyor must review and sign it."
