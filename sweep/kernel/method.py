"""The integrator's tableau: RODAS of order 4 (3), stiffly accurate and L-stable, with its own dense output.

Source: Hairer and Wanner, Solving Ordinary Differential Equations II, 2nd ed. 1996, sections IV.7 and IV.10 (digits from
memory; the tests check the order by the slope of the error). In the transformed form that needs no product with the Jacobian:
(I/(h gamma) - J) k_s = f(t + c_s h, y + sum_j a_sj k_j) + sum_j (c_sj / h) k_j + h d_s df/dt.
"""

import numpy as np

STAGES = 6
GAMMA = 0.25
TIMES = np.array([0.0, 0.386, 0.21, 0.63, 1.0, 1.0])
SLOPES = np.array([0.25, -0.1043, 0.1035, -0.0362, 0.0, 0.0])
A = np.zeros((6, 6))
A[1, :1] = [1.544]
A[2, :2] = [0.9466785280815826, 0.2557011698983284]
A[3, :3] = [3.314825187068521, 2.896124015972201, 0.9986419139977817]
A[4, :4] = [1.221224509226641, 6.019134481288629, 12.53708332932087, -0.6878860361058950]
A[5, :5] = [1.221224509226641, 6.019134481288629, 12.53708332932087, -0.6878860361058950, 1.0]
C = np.zeros((6, 6))
C[1, :1] = [-5.6688]
C[2, :2] = [-2.430093356833875, -0.2063599157091915]
C[3, :3] = [-0.1073529058151375, -9.594562251023355, -20.47028614809616]
C[4, :4] = [7.496443313967647, -10.24680431464352, -33.99990352819905, 11.70890893206160]
C[5, :5] = [8.083246795921522, -7.981132988064893, -31.52159432874371, 16.31930543123136, -6.058818238834054]
DENSE = np.array(
    [
        [10.12623508344586, -7.487995877610167, -34.80091861555747, -7.992771707568823, 1.025137723295662],
        [-0.6762803392801253, 6.087714651680015, 16.43084320892478, 24.76722511418386, -6.594389125716872],
    ]
)
"""y(theta) = (1 - theta) y0 + theta (y1 + (1 - theta) (p + theta q)), with p and q these sums over the first five stages."""
