/* A map from nodes to a word, for walks over shared graphs. Internal to core/formula. */
#ifndef MT_FORMULA_MAP_H
#define MT_FORMULA_MAP_H

#include "core/formula/expr.h"

typedef struct mt_map {
    size_t n, room; /* room is a power of two */
    const mt_expr **key;
    uintptr_t *value;
} mt_map;

/* Place of the value of e; made (0) if it is not there and `make` is set; NULL if absent or without memory.
 */
uintptr_t *mt_map_at(mt_map *map, const mt_expr *e, bool make);
void mt_map_end(mt_map *map);

#endif
