#include "neighbour_tree.h"

#include <math.h>
#include <stdlib.h>

#include "domain.h"
#include "element.h"
#include "numbers.h"

#define LEAF_SIZE 16
/* Halving 2^64 elements down to leaves nests no deeper. */
#define DEEPEST 64

void tree_init(struct neighbour_tree *tree, double box)
{
    tree->box = box;
    tree->order = NULL;
    for (int axis = 0; axis < 3; axis++)
        tree->sorted[axis] = NULL;
    tree->capacity = 0;
    store_init(&tree->nodes, sizeof(struct tree_node));
}

void tree_free(struct neighbour_tree *tree)
{
    free(tree->order);
    for (int axis = 0; axis < 3; axis++)
        free(tree->sorted[axis]);
    store_free(&tree->nodes);
}

static const double *position_of(const struct store *elements, size_t index)
{
    return ((const struct element *)store_at(elements, index))->position;
}

static size_t add_node(struct neighbour_tree *tree, const struct store *elements, size_t first,
                       size_t count)
{
    struct tree_node *node = store_append(&tree->nodes);
    node->first = first;
    node->count = count;
    for (int axis = 0; axis < 3; axis++) {
        double low = INFINITY, high = -INFINITY;
        for (size_t i = first; i < first + count; i++) {
            double x = position_of(elements, tree->order[i])[axis];
            low = smaller(low, x);
            high = larger(high, x);
        }
        node->centre[axis] = count > 0 ? 0.5 * (low + high) : 0.0;
        node->half[axis] = count > 0 ? 0.5 * (high - low) : 0.0;
    }
    return tree->nodes.count - 1;
}

static void swap(size_t *a, size_t *b)
{
    size_t kept = *a;
    *a = *b;
    *b = kept;
}

/* Partial sort (Hoare 1961): afterwards nothing before middle lies above anything after it. */
static void split(size_t *order, const struct store *elements, ptrdiff_t count, ptrdiff_t middle,
                  int axis)
{
    ptrdiff_t low = 0, high = count - 1;
    while (low < high) {
        double pivot = position_of(elements, order[middle])[axis];
        ptrdiff_t up = low, down = high;
        while (up <= down) {
            while (position_of(elements, order[up])[axis] < pivot)
                up++;
            while (position_of(elements, order[down])[axis] > pivot)
                down--;
            if (up <= down)
                swap(&order[up++], &order[down--]);
        }
        if (down < middle)
            low = up;
        if (middle < up)
            high = down;
    }
}

static int widest_axis(const struct tree_node *node)
{
    int widest = 0;
    for (int axis = 1; axis < 3; axis++) {
        if (node->half[axis] > node->half[widest])
            widest = axis;
    }
    return widest;
}

static void reserve(struct neighbour_tree *tree, size_t count)
{
    if (count <= tree->capacity)
        return;
    tree->capacity = count + count / 2;
    free(tree->order);
    tree->order = allocate(tree->capacity, sizeof *tree->order);
    for (int axis = 0; axis < 3; axis++) {
        free(tree->sorted[axis]);
        tree->sorted[axis] = allocate(tree->capacity, sizeof *tree->sorted[axis]);
    }
}

void tree_build(struct neighbour_tree *tree, const struct store *elements)
{
    reserve(tree, elements->count);
    for (size_t i = 0; i < elements->count; i++)
        tree->order[i] = i;
    tree->nodes.count = 0;
    add_node(tree, elements, 0, elements->count);
    /* Nodes are appended while the list is walked, so every one is reached. */
    for (size_t n = 0; n < tree->nodes.count; n++) {
        struct tree_node node = *tree_node(tree, n);
        if (node.count <= LEAF_SIZE)
            continue;
        size_t half = node.count / 2;
        split(tree->order + node.first, elements, (ptrdiff_t)node.count, (ptrdiff_t)half,
              widest_axis(&node));
        size_t left = add_node(tree, elements, node.first, half);
        size_t right = add_node(tree, elements, node.first + half, node.count - half);
        struct tree_node *parent = store_at(&tree->nodes, n);
        parent->left = left;
        parent->right = right;
    }
    for (size_t i = 0; i < elements->count; i++) {
        const double *position = position_of(elements, tree->order[i]);
        for (int axis = 0; axis < 3; axis++)
            tree->sorted[axis][i] = position[axis];
    }
}

void candidates_init(struct candidates *candidates)
{
    *candidates = (struct candidates){ 0, 0, NULL, { NULL, NULL, NULL } };
}

void candidates_free(struct candidates *candidates)
{
    free(candidates->index);
    for (int axis = 0; axis < 3; axis++)
        free(candidates->offset[axis]);
    candidates_init(candidates);
}

static void candidates_reserve(struct candidates *candidates, size_t capacity)
{
    if (capacity <= candidates->capacity)
        return;
    candidates->capacity = 2 * capacity;
    size_t size = candidates->capacity * sizeof(double);
    candidates->index = reallocate(candidates->index, candidates->capacity * sizeof(size_t));
    for (int axis = 0; axis < 3; axis++)
        candidates->offset[axis] = reallocate(candidates->offset[axis], size);
}

static int apart(const struct tree_node *node, const struct tree_node *leaf, double reach,
                 double box)
{
    double square = 0.0;
    for (int axis = 0; axis < 3; axis++) {
        double gap = fabs(nearest_image(node->centre[axis] - leaf->centre[axis], box)) -
                     node->half[axis] - leaf->half[axis];
        if (gap > 0.0)
            square += gap * gap;
    }
    return square > reach * reach;
}

/* Adds what of a node lies within reach of the leaf's extent. */
static void add_candidates(const struct neighbour_tree *tree, const struct tree_node *node,
                           const struct tree_node *leaf, double reach,
                           struct candidates *candidates)
{
    size_t count = candidates->count;
    candidates_reserve(candidates, count + node->count);
    double shift[3];
    for (int axis = 0; axis < 3; axis++) {
        /* The same image serves all of a node that is small against the box. */
        double apart = node->centre[axis] - leaf->centre[axis];
        shift[axis] = nearest_image(apart, tree->box) - apart - leaf->centre[axis];
    }
    for (size_t i = node->first; i < node->first + node->count; i++) {
        double square = 0.0;
        for (int axis = 0; axis < 3; axis++) {
            double offset = tree->sorted[axis][i] + shift[axis];
            double beyond = fabs(offset) - leaf->half[axis];
            candidates->offset[axis][count] = offset;
            square += beyond > 0.0 ? beyond * beyond : 0.0;
        }
        candidates->index[count] = tree->order[i];
        /* Written first and kept or overwritten after: there is no branch to guess wrong. */
        count += square < reach * reach;
    }
    candidates->count = count;
}

void tree_candidates(const struct neighbour_tree *tree, const struct tree_node *leaf, double reach,
                     struct candidates *candidates)
{
    size_t pending[DEEPEST + 1];
    size_t depth = 0;
    candidates->count = 0;
    pending[depth++] = 0;
    while (depth > 0) {
        const struct tree_node *node = tree_node(tree, pending[--depth]);
        if (apart(node, leaf, reach, tree->box))
            continue;
        if (node->left == 0) {
            add_candidates(tree, node, leaf, reach, candidates);
        } else {
            pending[depth++] = node->left;
            pending[depth++] = node->right;
        }
    }
}
