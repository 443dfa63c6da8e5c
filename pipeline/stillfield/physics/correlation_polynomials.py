"""The polynomials of the daily correlation, written out; made by `stillfield.physics.correlation_source`.

Each takes predictors ``x[letter][i]`` in the order of `stillfield.physics.correlation.LETTERS`, one coefficient a
term, and fills ``out[i]`` for i below `count`. One i is a number in compiled code, and a row of numbers in numpy.
"""

from __future__ import annotations

from typing import Any


def daily(x: Any, c: Any, out: Any, count: int) -> None:
    """Variant 'daily'.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape (36,)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """
    (
        c_1, c_S, c_ST, c_SS, c_E, c_SN, c_SSw, c_Sm, c_K, c_n, c_SSS, c_STw, c_SST, c_STT, c_SE, c_m, c_TK, c_TE,
        c_Sw, c_Tn, c_SwE, c_Tm, c_Sww, c_SK, c_SwK, c_TTT, c_SKK, c_T, c_SEK, c_SEE, c_NN, c_SSE, c_TTw, c_w, c_STE,
        c_SNK
    ) = (
        c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8], c[9], c[10], c[11], c[12], c[13], c[14], c[15], c[16],
        c[17], c[18], c[19], c[20], c[21], c[22], c[23], c[24], c[25], c[26], c[27], c[28], c[29], c[30], c[31],
        c[32], c[33], c[34], c[35],
    )
    for i in range(count):
        S, T, w, N, E, m, n, K = (
            x[0][i], x[1][i], x[2][i], x[3][i], x[4][i], x[5][i], x[6][i], x[7][i],
        )
        out[i] = (
            c_1 + S * (c_S + T * (c_ST + w * c_STw + T * c_STT + E * c_STE) + S * (c_SS + w * c_SSw + S * c_SSS + T *
            c_SST + E * c_SSE) + N * (c_SN + K * c_SNK) + m * c_Sm + E * (c_SE + K * c_SEK + E * c_SEE) + w * (c_Sw +
            E * c_SwE + w * c_Sww + K * c_SwK) + K * (c_SK + K * c_SKK)) + E * c_E + K * c_K + n * c_n + m * c_m + T *
            (c_T + K * c_TK + E * c_TE + n * c_Tn + m * c_Tm + T * (T * c_TTT + w * c_TTw)) + N * (N * c_NN) + w * c_w
        )


def daily_range(x: Any, c: Any, out: Any, count: int) -> None:
    """Variant 'daily-range'.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape (44,)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """
    (
        c_1, c_S, c_ST, c_SS, c_E, c_SN, c_SSw, c_Sm, c_K, c_n, c_SSS, c_STw, c_SST, c_STT, c_SE, c_m, c_TK, c_TE,
        c_Sw, c_Tn, c_SwE, c_Tm, c_Sww, c_SK, c_SwK, c_TTT, c_SKK, c_T, c_SEK, c_SEE, c_NN, c_SSE, c_TTw, c_w, c_STE,
        c_SNK, c_D, c_SD, c_STD, c_SwD, c_TD, c_wKD, c_TwD, c_ED
    ) = (
        c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8], c[9], c[10], c[11], c[12], c[13], c[14], c[15], c[16],
        c[17], c[18], c[19], c[20], c[21], c[22], c[23], c[24], c[25], c[26], c[27], c[28], c[29], c[30], c[31],
        c[32], c[33], c[34], c[35], c[36], c[37], c[38], c[39], c[40], c[41], c[42], c[43],
    )
    for i in range(count):
        S, T, w, N, E, m, n, K, D = (
            x[0][i], x[1][i], x[2][i], x[3][i], x[4][i], x[5][i], x[6][i], x[7][i], x[8][i],
        )
        out[i] = (
            c_1 + S * (c_S + T * (c_ST + w * c_STw + T * c_STT + E * c_STE + D * c_STD) + S * (c_SS + w * c_SSw + S *
            c_SSS + T * c_SST + E * c_SSE) + N * (c_SN + K * c_SNK) + m * c_Sm + E * (c_SE + K * c_SEK + E * c_SEE) +
            w * (c_Sw + E * c_SwE + w * c_Sww + K * c_SwK + D * c_SwD) + K * (c_SK + K * c_SKK) + D * c_SD) + E * (c_E
            + D * c_ED) + K * c_K + n * c_n + m * c_m + T * (c_T + K * c_TK + E * c_TE + n * c_Tn + m * c_Tm + T * (T
            * c_TTT + w * c_TTw) + D * c_TD + w * (D * c_TwD)) + N * (N * c_NN) + w * (c_w + K * (D * c_wKD)) + D *
            c_D
        )


def daily_humidity(x: Any, c: Any, out: Any, count: int) -> None:
    """Variant 'daily-humidity'.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape (44,)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """
    (
        c_1, c_S, c_ST, c_SS, c_E, c_SN, c_SSw, c_Sm, c_K, c_n, c_SSS, c_STw, c_SST, c_STT, c_SE, c_m, c_TK, c_TE,
        c_Sw, c_Tn, c_SwE, c_Tm, c_Sww, c_SK, c_SwK, c_TTT, c_SKK, c_T, c_SEK, c_SEE, c_NN, c_SSE, c_TTw, c_w, c_STE,
        c_SNK, c_h, c_Sh, c_STh, c_Swh, c_Th, c_Twh, c_Kh, c_wh
    ) = (
        c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8], c[9], c[10], c[11], c[12], c[13], c[14], c[15], c[16],
        c[17], c[18], c[19], c[20], c[21], c[22], c[23], c[24], c[25], c[26], c[27], c[28], c[29], c[30], c[31],
        c[32], c[33], c[34], c[35], c[36], c[37], c[38], c[39], c[40], c[41], c[42], c[43],
    )
    for i in range(count):
        S, T, w, N, E, m, n, K, h = (
            x[0][i], x[1][i], x[2][i], x[3][i], x[4][i], x[5][i], x[6][i], x[7][i], x[9][i],
        )
        out[i] = (
            c_1 + S * (c_S + T * (c_ST + w * c_STw + T * c_STT + E * c_STE + h * c_STh) + S * (c_SS + w * c_SSw + S *
            c_SSS + T * c_SST + E * c_SSE) + N * (c_SN + K * c_SNK) + m * c_Sm + E * (c_SE + K * c_SEK + E * c_SEE) +
            w * (c_Sw + E * c_SwE + w * c_Sww + K * c_SwK + h * c_Swh) + K * (c_SK + K * c_SKK) + h * c_Sh) + E * c_E
            + K * (c_K + h * c_Kh) + n * c_n + m * c_m + T * (c_T + K * c_TK + E * c_TE + n * c_Tn + m * c_Tm + T * (T
            * c_TTT + w * c_TTw) + h * c_Th + w * (h * c_Twh)) + N * (N * c_NN) + w * (c_w + h * c_wh) + h * c_h
        )


def daily_range_humidity(x: Any, c: Any, out: Any, count: int) -> None:
    """Variant 'daily-range-humidity'.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape (52,)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """
    (
        c_1, c_S, c_ST, c_SS, c_E, c_SN, c_SSw, c_Sm, c_K, c_n, c_SSS, c_STw, c_SST, c_STT, c_SE, c_m, c_TK, c_TE,
        c_Sw, c_Tn, c_SwE, c_Tm, c_Sww, c_SK, c_SwK, c_TTT, c_SKK, c_T, c_SEK, c_SEE, c_NN, c_SSE, c_TTw, c_w, c_STE,
        c_SNK, c_D, c_SD, c_STD, c_SwD, c_TD, c_wKD, c_TwD, c_ED, c_h, c_Sh, c_STh, c_Swh, c_Th, c_Twh, c_Kh, c_wh
    ) = (
        c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8], c[9], c[10], c[11], c[12], c[13], c[14], c[15], c[16],
        c[17], c[18], c[19], c[20], c[21], c[22], c[23], c[24], c[25], c[26], c[27], c[28], c[29], c[30], c[31],
        c[32], c[33], c[34], c[35], c[36], c[37], c[38], c[39], c[40], c[41], c[42], c[43], c[44], c[45], c[46],
        c[47], c[48], c[49], c[50], c[51],
    )
    for i in range(count):
        S, T, w, N, E, m, n, K, D, h = (
            x[0][i], x[1][i], x[2][i], x[3][i], x[4][i], x[5][i], x[6][i], x[7][i], x[8][i], x[9][i],
        )
        out[i] = (
            c_1 + S * (c_S + T * (c_ST + w * c_STw + T * c_STT + E * c_STE + D * c_STD + h * c_STh) + S * (c_SS + w *
            c_SSw + S * c_SSS + T * c_SST + E * c_SSE) + N * (c_SN + K * c_SNK) + m * c_Sm + E * (c_SE + K * c_SEK + E
            * c_SEE) + w * (c_Sw + E * c_SwE + w * c_Sww + K * c_SwK + D * c_SwD + h * c_Swh) + K * (c_SK + K * c_SKK)
            + D * c_SD + h * c_Sh) + E * (c_E + D * c_ED) + K * (c_K + h * c_Kh) + n * c_n + m * c_m + T * (c_T + K *
            c_TK + E * c_TE + n * c_Tn + m * c_Tm + T * (T * c_TTT + w * c_TTw) + D * c_TD + w * (D * c_TwD + h *
            c_Twh) + h * c_Th) + N * (N * c_NN) + w * (c_w + K * (D * c_wKD) + h * c_wh) + D * c_D + h * c_h
        )


def hourly(x: Any, c: Any, out: Any, count: int) -> None:
    """Variant 'hourly'.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape (56,)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """
    (
        c_1, c_S, c_ST, c_SS, c_SSP, c_E, c_SSw, c_q, c_Sm, c_SSS, c_SST, c_STk, c_STw, c_n, c_Sk, c_Sw, c_Sww, c_T,
        c_SSv, c_Swk, c_Tn, c_STT, c_Pk, c_m, c_SE, c_STP, c_D, c_wE, c_Tm, c_TTT, c_Tq, c_SSN, c_Twk, c_Tww, c_TP,
        c_STv, c_Swq, c_SP, c_Sq, c_k, c_TE, c_Tk, c_SEq, c_TTk, c_STq, c_w, c_wk, c_Tw, c_SSk, c_Swv, c_Sv, c_SSD,
        c_N, c_wwN, c_SPq, c_NNk
    ) = (
        c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8], c[9], c[10], c[11], c[12], c[13], c[14], c[15], c[16],
        c[17], c[18], c[19], c[20], c[21], c[22], c[23], c[24], c[25], c[26], c[27], c[28], c[29], c[30], c[31],
        c[32], c[33], c[34], c[35], c[36], c[37], c[38], c[39], c[40], c[41], c[42], c[43], c[44], c[45], c[46],
        c[47], c[48], c[49], c[50], c[51], c[52], c[53], c[54], c[55],
    )
    for i in range(count):
        S, T, w, N, E, m, n, D, P, q, k, v = (
            x[0][i], x[1][i], x[2][i], x[3][i], x[4][i], x[5][i], x[6][i], x[8][i], x[10][i], x[11][i], x[12][i],
            x[13][i],
        )
        out[i] = (
            c_1 + S * (c_S + T * (c_ST + k * c_STk + w * c_STw + T * c_STT + P * c_STP + v * c_STv + q * c_STq) + S *
            (c_SS + P * c_SSP + w * c_SSw + S * c_SSS + T * c_SST + v * c_SSv + N * c_SSN + k * c_SSk + D * c_SSD) + m
            * c_Sm + k * c_Sk + w * (c_Sw + w * c_Sww + k * c_Swk + q * c_Swq + v * c_Swv) + E * (c_SE + q * c_SEq) +
            P * (c_SP + q * c_SPq) + q * c_Sq + v * c_Sv) + E * c_E + q * c_q + n * c_n + T * (c_T + n * c_Tn + m *
            c_Tm + T * (T * c_TTT + k * c_TTk) + q * c_Tq + w * (c_Tw + k * c_Twk + w * c_Tww) + P * c_TP + E * c_TE +
            k * c_Tk) + P * (k * c_Pk) + m * c_m + D * c_D + w * (c_w + E * c_wE + k * c_wk + w * (N * c_wwN)) + k *
            c_k + N * (c_N + N * (k * c_NNk))
        )


def frost(x: Any, c: Any, out: Any, count: int) -> None:
    """Variant 'frost'.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape (9,)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """
    c_1, c_T, c_S, c_E, c_m, c_n, c_ST, c_N, c_w = (
        c[0], c[1], c[2], c[3], c[4], c[5], c[6], c[7], c[8],
    )
    for i in range(count):
        S, T, w, N, E, m, n = (
            x[0][i], x[1][i], x[2][i], x[3][i], x[4][i], x[5][i], x[6][i],
        )
        out[i] = (
            c_1 + T * c_T + S * (c_S + T * c_ST) + E * c_E + m * c_m + n * c_n + N * c_N + w * c_w
        )


#: By the name of the variant.
POLYNOMIALS = {
    "daily": daily, "daily-range": daily_range, "daily-humidity": daily_humidity, "daily-range-humidity":
    daily_range_humidity, "hourly": hourly, "frost": frost
}
