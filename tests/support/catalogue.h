/* The shipped call catalogue, for tests. */
#ifndef SUPPORT_CATALOGUE_H
#define SUPPORT_CATALOGUE_H

#include "settings/catalogue.h"
#include <stdbool.h>

/* Loads config/calls; prints what is wrong with it and gives false where it cannot. */
bool test_load_catalogue(struct catalogue *out);

#endif
