/* Principal values of symmetric tensors, for moments of domains and of normals. */
#ifndef MT_MEASURE_TENSOR_INSIDE_H
#define MT_MEASURE_TENSOR_INSIDE_H

/* Values of m in falling order and unit vectors of each (rows); the last component of a vector that is not 0
 * is positive. By Jacobi rotations to rounding (Golub & Van Loan, Matrix Computations; from memory). */
void mt_principal(double m[3][3], double value[3], double vector[3][3]);

#endif
