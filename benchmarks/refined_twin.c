/* The yardstick of benchmarks/refined.py: a plain program that counts self-avoiding walks by their contacts.
 *
 *   gcc -O3 -march=native -DMOMENTS=2 refined_twin.c -o refined_twin
 *   ./refined_twin 20
 *
 * Recursive depth-first search on a padded grid of the square lattice, the first step fixed. A byte of the grid says
 * how many of a site's neighbours are visited, and more than FOUR of them that the site is visited itself: one look
 * tells whether the walk may go there and how many contacts that makes. The last step is counted from those bytes;
 * neither it nor the site that it is taken from is marked.
 *
 * MOMENTS 0 counts by contacts, 1 adds the squared end-to-end distance, 2 also gyration2, the sum over pairs of
 * squared distances, from the sums of positions and of their squares: (n + 1) sum r^2 - (sum r)^2.
 *
 * Prints n, seconds of core time, and a line for each number of contacts: contacts, walks, end2, gyration2.
 */
#include <inttypes.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

enum { WIDTH = 64, SITES = WIDTH * WIDTH, ORIGIN = SITES / 2 + WIDTH / 2, NEIGHBOURS = 4, LONGEST = 30, VISITED = 16 };
#define EACH_NEIGHBOUR(DO, p) DO((p) + 1) DO((p) - 1) DO((p) + WIDTH) DO((p) - WIDTH)

typedef struct { uint64_t walks, end2, gyration2; } Sums;
typedef struct { int32_t x, y, squares; } Path; /* sums over its sites */

static uint8_t near[SITES];
static struct { int16_t x, y, square, unused; } at[SITES];
static Sums sums[2 * LONGEST];
static int length;

static inline Path on(Path path, int q)
{
#if MOMENTS > 1
    path.x += at[q].x, path.y += at[q].y, path.squares += at[q].square;
#endif
    return path;
}

static inline void count(int q, int contacts, Path path)
{
    Sums *s = sums + contacts;
    s->walks++;
#if MOMENTS > 0
    s->end2 += (uint64_t)at[q].square;
#endif
#if MOMENTS > 1
    const Path to = on(path, q);
    s->gyration2 += (uint64_t)((length + 1) * to.squares - to.x * to.x - to.y * to.y);
#endif
}

#define COUNT_OPEN(q) if (near[q] < VISITED) count(q, contacts + near[q], path);
#define STEP_OPEN(q) if (near[q] < VISITED) steps(q, left - 1, contacts + near[q] - 1, on(path, q));
#define COUNT_AS_NEAR(q) near[q]++;
#define COUNT_AS_FAR(q) near[q]--;

static inline void mark(int p) { near[p] += VISITED; EACH_NEIGHBOUR(COUNT_AS_NEAR, p) }
static inline void unmark(int p) { near[p] -= VISITED; EACH_NEIGHBOUR(COUNT_AS_FAR, p) }

/* All walks of `left` more steps from the site p, which is not marked yet. */
static void steps(int p, int left, int contacts, Path path)
{
    if (left == 1) {
        EACH_NEIGHBOUR(COUNT_OPEN, p)
        return;
    }
    mark(p);
    EACH_NEIGHBOUR(STEP_OPEN, p)
    unmark(p);
}

int main(int argc, char **argv)
{
    length = argc == 2 ? atoi(argv[1]) : 0;
    if (length < 2 || length > LONGEST) {
        fprintf(stderr, "usage: %s N, with 2 <= N <= %d\n", argv[0], LONGEST);
        return 2;
    }
    for (int i = 0; i < SITES; i++) {
        at[i].x = i % WIDTH - WIDTH / 2, at[i].y = i / WIDTH - WIDTH / 2;
        at[i].square = at[i].x * at[i].x + at[i].y * at[i].y;
    }
    const clock_t before = clock();
    mark(ORIGIN);
    steps(ORIGIN + 1, length - 1, 0, on((Path){0, 0, 0}, ORIGIN + 1));
    const double seconds = (double)(clock() - before) / CLOCKS_PER_SEC;

    printf("%d %.6f\n", length, seconds);
    for (int c = 0; c < 2 * LONGEST; c++)
        if (sums[c].walks)
            printf("%d %" PRIu64 " %" PRIu64 " %" PRIu64 "\n", c, NEIGHBOURS * sums[c].walks,
                   NEIGHBOURS * sums[c].end2, NEIGHBOURS * sums[c].gyration2);
    return 0;
}
