#include <math.h>
#include <string.h>

#include "rivals.h"

#define NUMBER float
#define NAME fused_single
#include "fused_loop.h"
#undef NUMBER
#undef NAME
#define NUMBER double
#define NAME fused_double
#include "fused_loop.h"

struct quantities fused(const struct gas *gas, const struct geometry *where)
{
    return gas->precision == SINGLE ? fused_single(gas, where) : fused_double(gas, where);
}
