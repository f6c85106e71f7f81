/* A binary tree over gas elements in a periodic box, to find neighbours leaf by leaf: all
 * particles of a leaf share one search, whose result each then sifts for itself. */
#ifndef SALTMARSH_NEIGHBOUR_TREE_H
#define SALTMARSH_NEIGHBOUR_TREE_H

#include "memory.h"

struct tree_node {
    double centre[3];
    double half[3];   /* half the extent of what lies in it */
    size_t first;     /* its elements are order[first] to order[first + count - 1] */
    size_t count;
    size_t left;      /* children, both 0 in a leaf */
    size_t right;
};

struct neighbour_tree {
    double box;
    struct store nodes;  /* struct tree_node; the root is 0 */
    size_t *order;
    double *sorted[3];   /* each coordinate, in this order */
    size_t capacity;
};

void tree_init(struct neighbour_tree *tree, double box);
void tree_free(struct neighbour_tree *tree);

/* elements holds struct element. */
void tree_build(struct neighbour_tree *tree, const struct store *elements);

static inline const struct tree_node *tree_node(const struct neighbour_tree *tree, size_t index)
{
    return (const struct tree_node *)store_at(&tree->nodes, index);
}

/* Elements within reach of a leaf, as positions relative to the leaf's centre; one array per
 * coordinate, so that distances can be computed several at a time. */
struct candidates {
    size_t count;
    size_t capacity;
    size_t *index;
    double *offset[3];
};

void candidates_init(struct candidates *candidates);
void candidates_free(struct candidates *candidates);

/* Finds every element that may lie within reach of any point of the leaf. */
void tree_candidates(const struct neighbour_tree *tree, const struct tree_node *leaf, double reach,
                     struct candidates *candidates);

#endif
