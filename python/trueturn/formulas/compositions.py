"""Symmetric compositions of Strang steps that stand alone: one set each."""

from __future__ import annotations

from trueturn.formulas.entry import Entry, mirrored

__all__ = ["ENTRIES"]

ENTRIES = (
    Entry(
        name="suzuki-umeno-8",
        order=8,
        source=(
            "M. Suzuki and K. Umeno, 'Higher-order decomposition theory of exponential operators and its "
            "applications to QMC and nonlinear dynamics', Springer Proc. Phys. 76, 74 (1993); the same set in R. I. "
            "McLachlan, SIAM J. Sci. Comput. 16, 151 (1995); digits as in E. Hairer, C. Lubich and G. Wanner, "
            "'Geometric Numerical Integration', section V.3.2; from memory"
        ),
        weights=mirrored(
            "0.74167036435061295344822780",
            "-0.40910082580003159399730010",
            "0.19075471029623837995387626",
            "-0.57386247111608226665638773",
            "0.29906418130365592384446354",
            "0.33462491824529818378495798",
            "0.31529309239676659663205666",
            "-0.79688793935291635401978884",
        ),
    ),
    Entry(
        name="sofroniou-spaletta-10",
        order=10,
        source=(
            "M. Sofroniou and G. Spaletta, 'Derivation of symmetric composition constants for symmetric "
            "integrators', Optim. Methods Softw. 20, 597 (2005); digits as in E. Hairer, C. Lubich and G. Wanner, "
            "'Geometric Numerical Integration', section V.3.2; from memory"
        ),
        weights=mirrored(
            "0.07879572252168641926390768",
            "0.31309610341510852776481247",
            "0.02791838323507806610952027",
            "-0.22959284159390709415121340",
            "0.13096206107716486317465686",
            "-0.26973340565451071434460973",
            "0.07497334315589143566613711",
            "0.11199342399981020488957508",
            "0.36613344954622675119314812",
            "-0.39910563013603589787862981",
            "0.10308739852747107731580277",
            "0.41143087395589023782070412",
            "-0.00486636058313526176219566",
            "-0.39203335370863990644808194",
            "0.05194250296244964703718290",
            "0.05066509075992449633587434",
            "0.04967437063972987905456880",
            "0.04931773575959453791768001",
        ),
    ),
)
