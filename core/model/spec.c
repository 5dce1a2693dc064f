/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Numbering of scalar coordinates. */
#include <leeway/spec.h>

#include <stdint.h>

size_t lw_joint_coords(lw_joint_type type)
{
    switch (type) {
    case LW_REVOLUTE:
    case LW_PRISMATIC:
    case LW_HELICAL:
        return 1;
    case LW_CYLINDRICAL:
    case LW_UNIVERSAL:
        return 2;
    case LW_PLANAR:
        return 3;
    case LW_FIXED:
    case LW_SPHERICAL:
        break;
    }
    return 0;
}

size_t lw_spec_joint_coord(const lw_spec *spec, size_t joint, size_t part)
{
    size_t n = 0;
    for (size_t j = 0; j < joint; j++) {
        n += lw_joint_coords(spec->joint[j].type);
    }
    return n + part;
}

size_t lw_spec_rod_coord(const lw_spec *spec, size_t rod)
{
    return lw_spec_joint_coord(spec, spec->n_joint, 0) + rod;
}

size_t lw_spec_coord_count(const lw_spec *spec)
{
    return lw_spec_rod_coord(spec, spec->n_rod);
}

bool lw_spec_coord_owner(const lw_spec *spec, size_t coord, size_t *joint, size_t *part,
                         size_t *rod)
{
    size_t first = 0;
    *rod = SIZE_MAX;
    *joint = SIZE_MAX;
    *part = 0;
    for (size_t j = 0; j < spec->n_joint; j++) {
        size_t n = lw_joint_coords(spec->joint[j].type);
        if (coord < first + n) {
            *joint = j;
            *part = coord - first;
            return true;
        }
        first += n;
    }
    if (coord < first + spec->n_rod) {
        *rod = coord - first;
        return true;
    }
    return false;
}

bool lw_spec_coord_turning(const lw_spec *spec, size_t coord)
{
    size_t joint;
    size_t part;
    size_t rod;
    if (!lw_spec_coord_owner(spec, coord, &joint, &part, &rod) || joint == SIZE_MAX) {
        return false;
    }
    switch (spec->joint[joint].type) {
    case LW_REVOLUTE:
    case LW_HELICAL:
    case LW_UNIVERSAL:
        return true;
    case LW_CYLINDRICAL:
        return part == 0;
    case LW_PLANAR:
        return part == 2;
    default:
        return false;
    }
}
