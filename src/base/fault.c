/* base/fault.c - filling in a lent struct firn_fault */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "base/fault.h"

#include "base/text.h"

enum firn_status firn_fault_tell(struct firn_fault *fault, enum firn_status status, int os_error, uint64_t at,
                                 const char *what)
{
    struct firn_text text;

    if (fault == NULL)
        return status;
    fault->os_error = os_error;
    fault->at = at;
    firn_text_start(&text, fault->what, sizeof fault->what);
    if (what != NULL)
        firn_text_add_name(&text, what);
    return status;
}
