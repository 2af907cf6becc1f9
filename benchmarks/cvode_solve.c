/* Solves many parameter sets of one problem with SUNDIALS CVODE.
 *
 * PROBLEM_FILE defines STATES, PARAMETERS and slopes(). Usage:
 *   cvode_solve INPUT OUTPUT METHOD REPEATS
 * INPUT holds doubles: rows, times, rtol, atol, then STATES starts, the times and the rows'
 * parameters. METHOD is b (BDF, dense Newton) or a (Adams, fixed point). The best time of REPEATS
 * passes over all rows goes to standard output in seconds, the states of the last to OUTPUT.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include <cvode/cvode.h>
#include <nvector/nvector_serial.h>
#include <sunlinsol/sunlinsol_dense.h>
#include <sunmatrix/sunmatrix_dense.h>
#include <sunnonlinsol/sunnonlinsol_fixedpoint.h>

#include PROBLEM_FILE

static int rhs(realtype t, N_Vector y, N_Vector d, void *p) {
  (void)t;
  slopes(N_VGetArrayPointer(y), (const double *)p, N_VGetArrayPointer(d));
  return 0;
}

static double now(void) {
  struct timespec t;
  clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
  return t.tv_sec + 1e-9 * t.tv_nsec;
}

static double *read_doubles(FILE *file, size_t count) {
  double *values = malloc(count * sizeof(double));
  if (fread(values, sizeof(double), count, file) != count) exit(1);
  return values;
}

int main(int argc, char **argv) {
  if (argc != 5) return 2;
  FILE *input = fopen(argv[1], "rb");
  if (!input) return 1;
  double *head = read_doubles(input, 4);
  size_t rows = (size_t)head[0], outputs = (size_t)head[1];
  double *start = read_doubles(input, STATES);
  double *times = read_doubles(input, outputs);
  double *parameters = read_doubles(input, rows * PARAMETERS);
  double *states = malloc(rows * outputs * STATES * sizeof(double));
  int stiff = argv[3][0] == 'b', repeats = atoi(argv[4]);

  SUNContext context;
  SUNContext_Create(NULL, &context);
  N_Vector y = N_VNew_Serial(STATES, context);
  memcpy(N_VGetArrayPointer(y), start, STATES * sizeof(double));
  void *memory = CVodeCreate(stiff ? CV_BDF : CV_ADAMS, context);
  CVodeInit(memory, rhs, 0.0, y);
  CVodeSStolerances(memory, head[2], head[3]);
  CVodeSetMaxNumSteps(memory, 1000000);
  SUNMatrix matrix = SUNDenseMatrix(STATES, STATES, context);
  SUNLinearSolver linear = SUNLinSol_Dense(y, matrix, context);
  SUNNonlinearSolver fixed = SUNNonlinSol_FixedPoint(y, 0, context);
  if (stiff) CVodeSetLinearSolver(memory, linear, matrix);
  else CVodeSetNonlinearSolver(memory, fixed);

  double best = INFINITY;
  for (int repeat = 0; repeat < repeats; repeat++) {
    double begin = now();
    for (size_t row = 0; row < rows; row++) {
      memcpy(N_VGetArrayPointer(y), start, STATES * sizeof(double));
      CVodeReInit(memory, 0.0, y);
      CVodeSetUserData(memory, parameters + row * PARAMETERS);
      for (size_t m = 0; m < outputs; m++) {
        realtype t;
        double *out = states + (row * outputs + m) * STATES;
        if (CVode(memory, times[m], y, &t, CV_NORMAL) < 0) {
          for (size_t i = 0; i < STATES; i++) out[i] = NAN;
        } else {
          memcpy(out, N_VGetArrayPointer(y), STATES * sizeof(double));
        }
      }
    }
    double taken = now() - begin;
    if (taken < best) best = taken;
  }
  printf("%.9e\n", best);
  FILE *output = fopen(argv[2], "wb");
  if (!output) return 1;
  fwrite(states, sizeof(double), rows * outputs * STATES, output);
  fclose(output);
  return 0;
}
