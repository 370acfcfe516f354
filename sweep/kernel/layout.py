"""Where each number stands: the header of the integer table, the block of one recipe segment, the rows of scratch memory.

A study is data to the kernel. Two tables of equal length hold it, one of integers and one of floats, so that an entry and its
coefficient share a position. Names, units and shapes stand here once; the kernel and the code that fills the tables use them.
"""

# header of the integer table --------------------------------------------------------------------------------------------
N_SPECIES, N_STATES, N_REACTIONS, N_ROWS = 0, 1, 2, 3  # species, chemical states z, reactions, all states
ROW_T, ROW_JACKET, ROW_INTEGRAL, ROW_ENERGY = 4, 5, 6, 7  # their rows in the state; always present
AT_REACTIONS, AT_SOURCES, AT_AMOUNTS, AT_SLOTS = 8, 9, 10, 11  # streams: rate terms, dz/dt, amounts from z, slot of (row, column)
AT_FACTOR, AT_FORWARD, AT_BACKWARD, N_SLOTS = 12, 13, 14, 15  # the sparse LU: operations of the factorisation and of the solves
HEAT_TERMS, CP_TERMS, RATE_TERMS = 16, 17, 18  # coefficients per heat of reaction, per heat capacity, per rate term (2 or 6)
BLOCK_FEED, BLOCK_BASE, BLOCK_RATE, BLOCK_HEAT, BLOCK_CP, BLOCK_LENGTH = 19, 20, 21, 22, 23, 24
AT_TARGET, AT_PRODUCT = 25, 26  # weights over z in the float table: moles of target consumed, of product formed
LU_FACTORS, N_LU_FORWARD, N_LU_BACKWARD = 27, 28, 29
HAS_DUTY = 30
# rows of scratch memory, each one vector (see `scratch_rows`)
(
    W_BLOCK, W_Y, W_NEW, W_F, W_SLOPE, W_K, W_X, W_SLOTS, W_N, W_C, W_CP, W_R, W_R_T, W_R_TIME, W_HEAT, W_D, W_LANE, W_END,
) = range(32, 50)  # fmt: skip
HEADER = 56

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
    OUT_STATUS, OUT_STEPS, OUT_REJECTED, OUT_TIME, OUT_CROSSED, OUT_T_MAX, OUT_T_MAX_TIME, OUT_HEAT_MAX, OUT_DUTY_MAX,
    OUT_BEST, OUT_BEST_TIME, OUT_REACTED_MAX, OUT_HEAT_SUM, OUT_BOUNDARY_SUM, OUT_END_TIME, OUT_RATE_MAX, OUT_RATE_MAX_TIME,
) = range(17)  # fmt: skip
OUT_STATES = 18  # then four states: at the batch's end, at the target, at the most productive time, at the last moment

# rows of one lane's own numbers, from W_LANE on -----------------------------------------------------------------------------
(
    L_TIME, L_STEP, L_DONE, L_BATCH_OVER, L_HEAT, L_HEAT_SLOPE, L_DUTY, L_DUTY_SLOPE, L_HEAT_NOW, L_DUTY_NOW, L_ABS_HEAT, L_ABS_BOUNDARY,
    L_T_MAX, L_T_MAX_TIME, L_HEAT_MAX, L_DUTY_MAX, L_TARGET, L_TURNAROUND, L_ATOL, L_TOO_HOT, L_DELTA, L_END, L_NEXT_SAMPLE,
    L_REACTED_MAX, L_OLD_STEP, L_FAILED_LAST, L_CAP, L_CROSSED, L_BEST, L_BEST_TIME, L_END_FIXED, L_EARLIEST, L_SUM_HEAT,
    L_SUM_BOUNDARY, L_PEND_HEAT, L_PEND_HEAT_SLOPE, L_PEND_DUTY, L_PEND_DUTY_SLOPE, L_PENDING, L_END_TIME,
    L_SEGMENT, L_STEPS, L_REJECTED, L_STATUS, L_PEND_STEP, L_TFINAL, L_SEG_END, L_RATE, L_RATE_SLOPE, L_PEND_RATE, L_PEND_RATE_SLOPE,
    L_RATE_MAX, L_RATE_MAX_TIME,
) = range(53)  # fmt: skip
LANE_ROWS = 53
