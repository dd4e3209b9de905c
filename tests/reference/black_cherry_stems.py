"""31 felled black cherry stems: diameter, height, volume of timber.

Source: data set `trees` of R's package datasets (open data), after H. A. Meyer, Forest Mensuration,
Penns Valley Publishers 1953, and T. A. Ryan, B. L. Joiner, B. F. Ryan, The Minitab Student
Handbook, Duxbury Press 1976. Its column `Girth` is the diameter at 4 ft 6 in, as R's help says.

Check values, from R 4: summary(trees) gives the means 13.25 in, 76 ft, 30.17 ft3;
lm(log(Volume) ~ log(Girth) + log(Height)) gives -6.63162, 1.98265, 1.11712 and a residual
standard error of 0.08139 on 28 degrees of freedom (values from memory, checked by refitting in
the test).
"""

from __future__ import annotations

INCH_M, FOOT_M = 0.0254, 0.3048

# Diameter in inches, height in feet, volume in cubic feet.
STEMS = (
    (8.3, 70, 10.3), (8.6, 65, 10.3), (8.8, 63, 10.2), (10.5, 72, 16.4), (10.7, 81, 18.8),
    (10.8, 83, 19.7), (11.0, 66, 15.6), (11.0, 75, 18.2), (11.1, 80, 22.6), (11.2, 75, 19.9),
    (11.3, 79, 24.2), (11.4, 76, 21.0), (11.4, 76, 21.4), (11.7, 69, 21.3), (12.0, 75, 19.1),
    (12.9, 74, 22.2), (12.9, 85, 33.8), (13.3, 86, 27.4), (13.7, 71, 25.7), (13.8, 64, 24.9),
    (14.0, 78, 34.5), (14.2, 80, 31.7), (14.5, 74, 36.3), (16.0, 72, 38.3), (16.3, 77, 42.6),
    (17.3, 81, 55.4), (17.5, 82, 55.7), (17.9, 80, 58.3), (18.0, 80, 51.5), (18.0, 80, 51.0),
    (20.6, 87, 77.0),
)  # fmt: skip
MEANS = (13.25, 76.0, 30.17)
LOG_FIT = (-6.63162, 1.98265, 1.11712)
LOG_RESIDUAL_SD = 0.08139
