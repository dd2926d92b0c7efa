"""Numbers in print for measures over listeners."""

N = float("nan")

# K. Krippendorff, Computing Krippendorff's Alpha-Reliability, 2011, section E: four observers, twelve units. From
# memory; the nominal, ordinal and interval figures of that table (0.743, 0.815, 0.849) bear it out.
KRIPPENDORFF_2011 = [
    [1, 2, 3, 3, 2, 1, 4, 1, 2, N, N, N],
    [1, 2, 3, 3, 2, 2, 4, 1, 2, 5, N, 3],
    [N, 3, 3, 3, 2, 3, 4, 2, 2, 5, 1, N],
    [1, 2, 3, 3, 2, 4, 4, 1, 2, 5, 1, N],
]
KRIPPENDORFF_2011_ORDINAL = 0.815

# Two-sided 95 % points of Student's t by degrees of freedom, as in any statistical table.
STUDENT_T_95 = {1: 12.706, 2: 4.303, 5: 2.571, 7: 2.365, 23: 2.069}
