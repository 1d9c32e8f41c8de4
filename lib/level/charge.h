/* How loud an explosion of a weight is, and whether one was of high or of low order. */
#ifndef LEVEL_CHARGE_H
#define LEVEL_CHARGE_H

#include <stdbool.h>

/* Peak level at a slant range, dB re 1 uPa, of so many kg of TNT: 52.4 MPa (R / W^(1/3))^-1.13, R in m, W in
 * kg (Arons, J. Acoust. Soc. Am. 26, 343, 1954; held against measurements in shallow water by Soloway and
 * Dahl, J. Acoust. Soc. Am. 136, EL218, 2014). NAN where either is not above 0. */
double charge_peak_db(double weight_kg, double range_m);

enum charge_order { CHARGE_UNTOLD, CHARGE_LOW_ORDER, CHARGE_HIGH_ORDER };

struct charge_judgement {
    enum charge_order order;
    double high_db; /* expected there of the charge with its donor */
    double low_db;  /* expected at most of a low order */
};

/* By the measured peak, dB re 1 uPa, at that range. A low order is as loud as its donor, or where no donor is
 * known 20 dB below the charge (Robinson and others, Marine Pollution Bulletin 160, 111646, 2020: more than
 * 20 dB, and by the donor's size). What is nearer to the one is taken for it; what lies within a quarter of
 * their distance from the middle, or where they are less than 6 dB apart, is untold (own choice: a formula
 * for deep water errs by some dB). A clipped peak is a lower bound: it can speak for a high order alone. NAN
 * or INFINITY anywhere: untold. donor_kg may be NAN or 0: none is known. */
struct charge_judgement charge_judge(double peak_db, bool clipped, double range_m, double charge_kg,
                                     double donor_kg);

const char *charge_order_text(enum charge_order order); /* "high order", "low order", "cannot be told" */

#endif
