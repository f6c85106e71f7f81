/* The fused loop for one type of number; included by fused.c with NUMBER and NAME defined. */

static struct quantities NAME(const struct gas *gas, const struct geometry *where)
{
    const NUMBER *position = gas->position, *velocity = gas->velocity, *mass = gas->mass;
    const NUMBER *star_formation_rate = gas->star_formation_rate;
    const double *edges = where->edges;
    double least = edges[0] * edges[0], most = edges[SHELLS] * edges[SHELLS];
    double rate = 0.0, total = 0.0, outward[SHELLS] = { 0 }, inward[SHELLS] = { 0 }, shell_mass[SHELLS] = { 0 };
    uint64_t elements[SHELLS] = { 0 };
#pragma omp parallel for schedule(static)                                                                            \
    reduction(+ : rate, total, outward[ : SHELLS], inward[ : SHELLS], shell_mass[ : SHELLS], elements[ : SHELLS])
    for (size_t i = 0; i < gas->count; i++) {
        rate += star_formation_rate[i];
        total += mass[i];
        double d[3], square = 0.0;
        for (int axis = 0; axis < 3; axis++) {
            d[axis] = position[3 * i + axis] - where->station[axis];
            d[axis] -= where->box * rint(d[axis] / where->box);
            square += d[axis] * d[axis];
        }
        if (square < least || square >= most)
            continue;
        double radius = sqrt(square);
        int shell = 0;
        while (radius >= edges[shell + 1])
            shell++;
        double along = d[0] * velocity[3 * i] + d[1] * velocity[3 * i + 1] + d[2] * velocity[3 * i + 2];
        double flux = mass[i] * (along / radius + where->hubble * radius);
        if (flux >= 0.0)
            outward[shell] += flux;
        else
            inward[shell] += flux;
        shell_mass[shell] += mass[i];
        elements[shell]++;
    }
    struct quantities found = { .star_formation_rate = rate, .mass = total };
    memcpy(found.outward, outward, sizeof outward);
    memcpy(found.inward, inward, sizeof inward);
    memcpy(found.shell_mass, shell_mass, sizeof shell_mass);
    memcpy(found.elements, elements, sizeof elements);
    return found;
}
