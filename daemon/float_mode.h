/* How the processor treats denormal numbers in the threads that run lib. */
#ifndef FLOAT_MODE_H
#define FLOAT_MODE_H

/* Sets flush-to-zero and denormals-are-zero in the calling thread: a decaying filter must neither cost a
 * hundredfold nor give other bits in one thread than in another. Nothing on processors without such a mode.
 */
void float_mode_flush_to_zero(void);

#endif
