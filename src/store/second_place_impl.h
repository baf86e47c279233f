/*
 * second_place_impl.h - what writing and reading the second place share.
 */
#ifndef STORE_SECOND_PLACE_IMPL_H
#define STORE_SECOND_PLACE_IMPL_H

#include "base/str.h"
#include "store/second_place.h"
#include "store/store_impl.h"

#define SECOND_PLACE_SUFFIX ".lines"

/* Appends the folder's path; makes nothing. */
MUST_CHECK int second_place_folder(const char *case_id, struct str *out, struct err *err);

#endif
