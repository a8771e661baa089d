#include "core/measure/tensor_inside.h"

#include <math.h>

/* One rotation in the plane of axes p, q that brings m[p][q] to 0. */
static void rotate(double m[3][3], double v[3][3], int p, int q) {
    double theta = (m[q][q] - m[p][p]) / (2 * m[p][q]);
    double t = (theta >= 0 ? 1 : -1) / (fabs(theta) + sqrt(theta * theta + 1));
    double c = 1 / sqrt(t * t + 1), s = t * c;
    for (int i = 0; i < 3; i++) {
        double a = m[i][p], b = m[i][q];
        m[i][p] = c * a - s * b, m[i][q] = s * a + c * b;
    }
    for (int i = 0; i < 3; i++) {
        double a = m[p][i], b = m[q][i];
        m[p][i] = c * a - s * b, m[q][i] = s * a + c * b;
        a = v[p][i], b = v[q][i];
        v[p][i] = c * a - s * b, v[q][i] = s * a + c * b;
    }
    m[p][q] = m[q][p] = 0;
}

static void swap(double value[3], double v[3][3], int i, int j) {
    double keep = value[i];
    value[i] = value[j], value[j] = keep;
    for (int a = 0; a < 3; a++) {
        keep = v[i][a];
        v[i][a] = v[j][a], v[j][a] = keep;
    }
}

static void turn(double v[3]) {
    for (int a = 2; a >= 0; a--) {
        if (fabs(v[a]) < 1e-14) continue;
        for (int b = 0; b < 3 && v[a] < 0; b++)
            if (b != a) v[b] = -v[b];
        v[a] = fabs(v[a]);
        return;
    }
}

void mt_principal(double m[3][3], double value[3], double vector[3][3]) {
    double size = 0;
    for (int i = 0; i < 9; i++) size += fabs(m[i / 3][i % 3]), vector[i / 3][i % 3] = i % 4 == 0;
    for (int sweep = 0; sweep < 20; sweep++)
        for (int i = 0; i < 3; i++)
            if (fabs(m[i][(i + 1) % 3]) > 1e-17 * size) rotate(m, vector, i, (i + 1) % 3);
    for (int i = 0; i < 3; i++) value[i] = m[i][i];
    for (int i = 0; i < 3; i++) /* two swaps and one more sort three */
        if (value[i % 2] < value[i % 2 + 1]) swap(value, vector, i % 2, i % 2 + 1);
    for (int i = 0; i < 3; i++) turn(vector[i]);
}
