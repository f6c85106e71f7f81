/*
 * Remembers how limno_lend_array was called last, and passes the call on. Linked with
 * -Wl,--wrap=limno_lend_array, so that calls of the Fortran module come here first.
 */
#include "limnograph.h"

limno_status __real_limno_lend_array(limno_run *run, const char *species, const char *field,
                                     const limno_array *array, size_t count);

static limno_array last;
static const void *parts[64];
static size_t elements;

limno_status __wrap_limno_lend_array(limno_run *run, const char *species, const char *field,
                                     const limno_array *array, size_t count)
{
    last = *array;
    elements = count;
    if (array->arrays != NULL) {
        for (uint32_t part = 0; part < array->components && part < 64; part++)
            parts[part] = array->arrays[part];
    }
    return __real_limno_lend_array(run, species, field, array, count);
}

/* Where the header says that the number stands. */
intptr_t recorded_address(intptr_t component, intptr_t element)
{
    static const ptrdiff_t bytes[] = { 0, 4, 8, 4, 4, 8, 8 };
    ptrdiff_t packed = bytes[last.scalar];
    if (last.arrays != NULL)
        return (intptr_t)parts[component] + element * last.stride;
    return (intptr_t)last.data + element * last.stride
           + component * (last.component_stride != 0 ? last.component_stride : packed);
}

intptr_t recorded_count(void)
{
    return (intptr_t)elements;
}

intptr_t recorded_components(void)
{
    return (intptr_t)last.components;
}

intptr_t recorded_scalar(void)
{
    return last.scalar;
}
