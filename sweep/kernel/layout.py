"""Where each number stands: the header of the integer table, the block of one recipe segment, the rows of scratch memory.

A study is data to the kernel. Two tables of equal length hold it, one of integers and one of floats, so that an entry and its
coefficient share a position. Names, units and shapes stand here once; the kernel and the code that fills the tables use them.
"""

LANES = 16  # batches that are marched side by side
STRIDE = 8 * LANES  # bytes of one vector in memory
MARCH_TAKES = "qqqqqqqqqqqqqqqdq"  # arguments of the compiled march: q an integer or address, d a double

# header of the integer table --------------------------------------------------------------------------------------------
N_SPECIES, N_STATES, N_REACTIONS, N_ROWS = 0, 1, 2, 3  # species, chemical states z, reactions, all states
# rows of the state after z: temperature, jacket, controller integral, energy over the boundary; always present, in this order
HEAT_TERMS, CP_TERMS, RATE_TERMS, HAS_DUTY = 4, 5, 6, 7  # coefficients per heat of reaction, heat capacity, rate term (2 or 6)
BLOCK_FEED, BLOCK_BASE, BLOCK_RATE, BLOCK_HEAT, BLOCK_CP, BLOCK_LENGTH = range(8, 14)
# streams, written by `program` (their form is described there)
AT_REACTIONS, AT_SOURCES, AT_AMOUNTS, AT_COLUMNS, AT_TOUCHED, AT_CHEMICAL, AT_SLOTS, AT_FACTOR, AT_FORWARD, AT_BACKWARD = range(14, 24)
AT_TARGET, AT_PRODUCT, AT_METHOD = 24, 25, 26  # in the float table: moles of target consumed, of product formed; the tableau
N_SLOTS = 27
N_WATCHES, AT_WATCHES = 28, 29  # conditions that are watched for, and their stream
# rows of scratch memory, each one vector (laid out by `program`)
(
    W_LANE, W_Y, W_NEW, W_F, W_SLOPE, W_K, W_P, W_Q, W_DENSE, W_BEFORE, W_BEST, W_SLOTS, W_N, W_C, W_CP, W_R, W_HEAT, W_REFERENCE, W_R_T, W_R_TIME,
    W_D, W_CP_Z, W_HEAT_Z, W_REFERENCE_Z, W_BLOCK, W_LEVEL, W_END,
) = range(32, 59)  # fmt: skip
HEADER = 59

# block of one segment of one point: the fixed part (SI) --------------------------------------------------------------------
T_END, T_START, VOLUME, VOLUME_RATE = 0, 1, 2, 3  # s, s, m3 at the segment's start, m3/s
UA_CONSTANT, UA_PER_VOLUME = 4, 5  # W/K, W/K/m3
FREE = 6  # 1 where the temperature follows the balance, 0 where it is held
DUTY_ON, DUTY, SET_POINT, HOLD_RATE = 7, 8, 9, 10  # 1 or 0, W, K, 1/s
JACKET_CAPACITY_INVERSE, JACKET_RENEWAL, INLET = 11, 12, 13  # K/J (0: the jacket stays as it is), 1/s fully open, K
GAIN, RESET_INVERSE, OPENING = 14, 15, 16  # 1/K, 1/s, opening without error
WALL, STIRRER, LOSS, AMBIENT = 17, 18, 19, 20  # J/K, W, W/K, K
FEED_CP = 21  # four coefficients, W/K
FEED_HEAT = 25  # W, enthalpy brought by feeds, on the scale where the integral of c_p from 0 K is zero
JACKET_SET, JACKET_START = 26, 27  # 1 where the jacket temperature is set at the segment's start; K
BLOCK_FIXED = 28

# constants of one point ----------------------------------------------------------------------------------------------------
END_FIXED, END_EARLIEST, TARGET_AMOUNT, TURNAROUND, ATOL_AMOUNT, TOO_HOT, DELTA, T_FINAL = range(8)
N_CONSTANTS = 8

# what a march leaves per point ---------------------------------------------------------------------------------------------
(
    OUT_STATUS, OUT_STEPS, OUT_REJECTED, OUT_TIME, OUT_CROSSED, OUT_T_MAX, OUT_T_MAX_TIME, OUT_HEAT_MAX, OUT_DUTY_MAX, OUT_RATE_MAX,
    OUT_RATE_MAX_TIME, OUT_BEST, OUT_BEST_TIME, OUT_REACTED_MAX, OUT_HEAT_SUM, OUT_BOUNDARY_SUM, OUT_END_TIME,
) = range(17)  # fmt: skip
OUT_EVENT = 17  # which condition broke the march off at OUT_TIME; -1: none
OUT_STATES = 18  # then four states: at the batch's end, at the target, at the most productive time, at the last moment

# rows of W_LANE: a lane's own numbers. The first stand in the order of OUT_*, and `leave` copies them out --------------------
(
    L_STATUS, L_STEPS, L_REJECTED, L_TIME, L_CROSSED, L_T_MAX, L_T_MAX_TIME, L_HEAT_MAX, L_DUTY_MAX, L_RATE_MAX,
    L_RATE_MAX_TIME, L_BEST, L_BEST_TIME, L_REACTED_MAX, L_SUM_HEAT, L_SUM_BOUNDARY, L_END_TIME,
) = range(17)  # fmt: skip
LEFT = 17
CONSTANTS = 17  # then the point's constants, in their order
(L_END_FIXED, L_EARLIEST, L_TARGET, L_TURNAROUND, L_ATOL, L_TOO_HOT, L_DELTA, L_FINAL) = range(CONSTANTS, CONSTANTS + N_CONSTANTS)
(
    L_STEP, L_SEGMENT, L_SEGMENT_END, L_FAILED_LAST, L_BATCH_END, L_BATCH_OVER, L_SAMPLE, L_SAMPLE_TIME, L_PENDING, L_STEP_BEFORE, L_BROUGHT,
) = range(25, 36)  # fmt: skip
# of heat release (W), cooling duty (W) and dT/dt (K/s): value and slope at the step's start, the same a step before
L_HEAT, L_HEAT_SLOPE, L_HEAT_BEFORE, L_HEAT_SLOPE_BEFORE = range(36, 40)
L_DUTY, L_DUTY_SLOPE, L_DUTY_BEFORE, L_DUTY_SLOPE_BEFORE = range(40, 44)
L_RATE, L_RATE_SLOPE, L_RATE_BEFORE, L_RATE_SLOPE_BEFORE = range(44, 48)
L_HEAT_NOW, L_DUTY_NOW, L_RATE_NOW = 48, 49, 50  # as last evaluated: after the stages, near the step's end
L_THETA = 51  # a fraction of the step, handed to or from scalar code
L_SHRINK_BEFORE, L_GOOD_STEP = 52, 53  # of the last good step: its error to the power -1/5, its length
L_EVENT, L_EVENT_THETA, L_EVENT_TIME = 54, 55, 56  # the condition that was met (-1: none), where in the step, and when (s)
L_PATH = 57  # five: a watched quantity along the step, handed to scalar code
LANE_ROWS = 62
