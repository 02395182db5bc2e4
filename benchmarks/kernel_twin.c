/* The yardstick of benchmarks/kernel.py: a plain program that counts self-avoiding walks.
 *
 *   gcc -O3 -march=native -DDIMENSION=2 -DUNROLLED=1 kernel_twin.c -o kernel_twin
 *   ./kernel_twin 22
 *
 * Recursive depth-first search on a padded grid of the square (DIMENSION 2) or cubic (3) lattice. A byte of the
 * grid is 1 where the walk may go. The first step is fixed: the sum is multiplied by the number of neighbours.
 * The last step is counted, not visited: the bytes of the neighbours are added up.
 *
 * UNROLLED 0 is that one function and nothing else. UNROLLED 1 writes out the last levels of the recursion by
 * macro, so that the compiler inlines them, and has no branch on the last level that is visited: the fastest
 * form we found of the same search. How many levels pay was measured: five on the square, three on the cubic
 * lattice, whose six neighbours a level fill the instruction cache sooner.
 *
 * Prints one line: n, the number of n-step walks, seconds of core time, and walks enumerated a second, that is
 * the number of walks with the fixed first step (count / neighbours) over the core time.
 */
#include <inttypes.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

#if DIMENSION == 2
enum { WIDTH = 64, SITES = WIDTH * WIDTH, ORIGIN = SITES / 2 + WIDTH / 2, NEIGHBOURS = 4, LONGEST = 30 };
#define EACH_NEIGHBOUR(DO, p) DO(p + 1) DO(p - 1) DO(p + WIDTH) DO(p - WIDTH)
#elif DIMENSION == 3
/* Not a power of two: the planes of one column would fall into the same cache set. */
enum { WIDTH = 43, PLANE = WIDTH * WIDTH, SITES = PLANE * WIDTH, ORIGIN = SITES / 2, NEIGHBOURS = 6, LONGEST = 20 };
#define EACH_NEIGHBOUR(DO, p) DO(p + 1) DO(p - 1) DO(p + WIDTH) DO(p - WIDTH) DO(p + PLANE) DO(p - PLANE)
#else
#error "DIMENSION must be 2 or 3"
#endif

static uint8_t open_site[SITES];

#define ADD(q) +*(q)

/* Walks of one more step from p. */
static inline uint64_t last_step(const uint8_t *p) { return 0 EACH_NEIGHBOUR(ADD, p); }

#if UNROLLED

#define ADD_LAST(q) +*(q) * last_step(q)
#define ADD_2(q) if (*(q)) walks += steps_2(q);
#define ADD_3(q) if (*(q)) walks += steps_3(q);
#define ADD_4(q) if (*(q)) walks += steps_4(q);

static inline __attribute__((always_inline)) uint64_t steps_2(uint8_t *p)
{
    *p = 0;
    uint64_t walks = 0 EACH_NEIGHBOUR(ADD_LAST, p);
    *p = 1;
    return walks;
}

#define LEVEL(k, attributes)                                                                                         \
    static attributes uint64_t steps_##k(uint8_t *p)

#define BODY(ADD_BELOW)                                                                                              \
    {                                                                                                                \
        uint64_t walks = 0;                                                                                          \
        *p = 0;                                                                                                      \
        EACH_NEIGHBOUR(ADD_BELOW, p)                                                                                 \
        *p = 1;                                                                                                      \
        return walks;                                                                                                \
    }

#if DIMENSION == 2
LEVEL(3, inline __attribute__((always_inline))) BODY(ADD_2)
LEVEL(4, inline __attribute__((always_inline))) BODY(ADD_3)
LEVEL(5, __attribute__((noinline))) BODY(ADD_4)
enum { LEVELS = 5 };
#define LAST_LEVELS steps_5
#else
LEVEL(3, __attribute__((noinline))) BODY(ADD_2)
enum { LEVELS = 3 };
#define LAST_LEVELS steps_3
#endif

#else

enum { LEVELS = 1 };
#define LAST_LEVELS last_step

#endif

#define ADD_STEPS(q) if (*(q)) walks += steps(q, left - 1);

/* Walks of `left` more steps from the open site p; left >= LEVELS. */
static uint64_t steps(uint8_t *p, int left)
{
    if (left == LEVELS) return LAST_LEVELS(p);
    uint64_t walks = 0;
    *p = 0;
    EACH_NEIGHBOUR(ADD_STEPS, p)
    *p = 1;
    return walks;
}

int main(int argc, char **argv)
{
    const int n = argc == 2 ? atoi(argv[1]) : 0;
    if (n <= LEVELS || n > LONGEST) {
        fprintf(stderr, "usage: %s N, with %d < N <= %d\n", argv[0], LEVELS, LONGEST);
        return 2;
    }
    for (int i = 0; i < SITES; i++) open_site[i] = 1;
    open_site[ORIGIN] = 0;

    const clock_t before = clock();
    const uint64_t enumerated = steps(open_site + ORIGIN + 1, n - 1);
    const double seconds = (double)(clock() - before) / CLOCKS_PER_SEC;

    printf("%d %" PRIu64 " %.6f %.0f\n", n, NEIGHBOURS * enumerated, seconds, (double)enumerated / seconds);
    return 0;
}
