"""The reasons a verdict can have: limits, sentence, next step and source, in one table."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

__all__ = ["RULES", "Rule"]


@dataclass(frozen=True)
class Rule:
    """One reason: its limits, what it says, what to do, and where the limits come from."""

    strained: float
    refit: float
    # "from" is "above" with the limits themselves included.
    worse: Literal["above", "from", "below", "always", "note"]
    sentence: str
    next_step: str
    source: str
    # What to do from the refit limit on, where that differs.
    next_step_refit: str = ""


_REFIT = "Refit under the change, or state a smaller change."
_MORE = "Ask for a smaller change, bring more draws, or refit."

RULES: Mapping[str, Rule] = {
    "support_gap": Rule(
        math.nan,
        math.nan,
        "always",
        "The new prior of {term} reaches {new}, the old one only {old}: no draw can lie there.",
        "Refit with the new prior, or restrict it to the old support with Flat or a callable.",
        "exact: weights of draws that cannot occur are never seen",
    ),
    "prior_widened": Rule(
        0.5,
        1.0,
        "from",
        "Widening the prior of {term} gives weights whose tail shape is {figure} by algebra "
        "({posterior} posterior); from 0.5 on their variance is infinite.",
        "Widen the prior less, or refit: from the broader prior the narrower one is reachable.",
        "derived; the limit 1/2 is exact for normal, gamma and beta posteriors",
    ),
    "likelihood_loosened": Rule(
        0.5,
        1.0,
        "from",
        "Taking the likelihood to the power {power} gives weights whose tail shape is {figure} "
        "where the data dominate; from 0.5 on their variance is infinite.",
        "Keep the power above one half, or refit with the weaker likelihood.",
        "derived; the limit 1/2 is exact for normal posteriors",
    ),
    "noise_raised": Rule(
        0.5,
        1.0,
        "from",
        "Noise times {factor} gives weights whose tail shape is {figure} where the data dominate; "
        "from 0.5 on (a factor of the root of 2, in any dimension) their variance is infinite.",
        "Keep the factor below 1.41, or refit with more noise: from there less is reachable.",
        "derived; the limit is exact for normal posteriors that the data dominate",
    ),
    "weight_shape": Rule(
        0.7,
        1.0,
        "above",
        "The tail shape of the weights is {figure}, above {limit}: {meaning}.",
        _MORE,
        "Vehtari, Simpson, Gelman, Yao, Gabry (2024), JMLR 25",
        _REFIT,
    ),
    "quantity_shape": Rule(
        1.0,
        math.inf,
        "from",
        "The tail shape of this quantity's contributions is {figure}, not below {limit}, and fewer "
        "than 4 draws carry it: its Monte Carlo error cannot be relied on.",
        "Ask for a less tail-bound quantity (a median, a probability), a smaller change, or refit.",
        "no finite mean from 1 on; where 4 draws or more carry a quantity, and below 1, intervals "
        "of the right degrees of freedom hold whatever the shape (make honesty); ours",
    ),
    "few_contributions": Rule(
        2.0,
        -math.inf,
        "below",
        "As few as {figure} draws carry this estimate on one side, below {limit}: its Monte Carlo "
        "error cannot be relied on.",
        "Bring more draws, ask for a less tail-bound quantity (a median, a probability), or refit.",
        "draws over squared skewness (Cochran 1977 asks for 25 with normal quantiles); limit ours",
    ),
    "few_effective": Rule(
        100.0,
        25.0,
        "below",
        "The effective size of the weights is {figure}, below {limit}.",
        _MORE,
        "ours",
    ),
    "few_effective_entropy": Rule(
        50.0,
        20.0,
        "below",
        "The entropy form of the effective size is {figure}, below {limit}.",
        _MORE,
        "ours",
    ),
    "few_effective_draws": Rule(
        50.0,
        10.0,
        "below",
        "Weights and chains leave {figure} effective draws for this quantity, below {limit}.",
        "Bring more draws, or run the base longer: its error is itself uncertain.",
        "ours",
    ),
    "few_carry": Rule(
        0.1,
        0.3,
        "above",
        "One draw carries a share of {figure} of all weight, above {limit}.",
        "Look at that draw; ask for a smaller change, bring more draws, or refit.",
        "ours",
    ),
    "chains_disagree": Rule(
        1e-3,
        1e-6,
        "below",
        "The chains disagree about this quantity once reweighted (p = {figure}, below {limit}).",
        "Look at the answer chain by chain; run the base longer, or refit.",
        "chi-square test of the chain means; limits ours",
    ),
    "chain_share": Rule(
        1e-3,
        1e-6,
        "below",
        "The chains hold unequal shares of the weight (p = {figure}, below {limit}).",
        "Look at the answer chain by chain; run the base longer, or refit.",
        "chi-square test of the chain means; limits ours",
    ),
    "event_draws": Rule(
        10.0,
        3.0,
        "below",
        "Only {figure} effective draws lie {side} the event, below {limit}.",
        "Choose a less extreme event, bring more draws, or refit.",
        "ours: above 5 intervals at the nominal 95 % covered 92 to 96 %",
    ),
    "draws_beyond": Rule(
        10.0,
        3.0,
        "below",
        "Only {figure} effective draws lie {side} this limit, below {limit}.",
        "Ask for a less extreme quantile, or bring more draws.",
        "ours: above 5 intervals at the nominal 95 % covered 92 to 96 %",
    ),
    "quantile_reach": Rule(
        math.nan,
        math.nan,
        "always",
        "This quantile's probability is within its own Monte Carlo error of 0 or 1.",
        "Ask for a less extreme quantile, or bring more draws.",
        "ours",
    ),
    "saturated_divergence": Rule(
        0.6,
        0.75,
        "above",
        "The divergence of target from base measures {figure} of the largest value that this "
        "number of draws can show, above {limit}: it is not measured but capped.",
        _REFIT,
        "about exp(divergence) draws are needed (Chatterjee & Diaconis 2018); limits ours",
    ),
    "autocorrelated_tail": Rule(
        10.0,
        3.0,
        "below",
        "The largest weights come from {figure} separate excursions of the chains, below {limit}.",
        "Run the base longer, or refit: neighbouring draws repeat the same information.",
        "ours",
    ),
    "edge_pressure": Rule(
        math.nan,
        math.nan,
        "note",
        "The base density of {term} at the moved limit {edge} is {figure} per base sd: "
        "the answer moves that much faster the more mass stands there.",
        "A figure near 0 means that little is expected beyond the limit, if no other mode is.",
        "derivative of an expectation in its limit; estimated from the draws near the edge",
    ),
    "draws_lost": Rule(
        math.nan,
        math.nan,
        "note",
        "A share of {figure} of the draws lies outside the target's support and has no weight.",
        "Nothing to do if that is what the change means.",
        "counted",
    ),
    "support_unknown": Rule(
        math.nan,
        math.nan,
        "note",
        "Whether the target of {term} reaches beyond the base's support cannot be seen.",
        "State both terms as distributions to have their supports compared.",
        "exact",
    ),
    "no_change": Rule(
        math.nan,
        math.nan,
        "note",
        "No change: target and base are the same.",
        "If a change was meant, look whether it was wired to the right term.",
        "exact",
    ),
    "base_unverified": Rule(
        math.nan,
        math.nan,
        "note",
        "That the stated terms are the ones the draws came from has not been tested.",
        "Compare a known posterior summary of the fit with the base answer.",
        "exact",
    ),
    "tail_beyond": Rule(
        1.5,
        10.0,
        "above",
        "Draws pushed out by a factor of {factor} find another variance of the weights than the "
        "draws themselves, by a factor of {figure}, above {limit}: the target's tails are heavy.",
        "Temper, which moves draws into the tails, or refit.",
        "derived: both estimate one second moment; limits ours",
    ),
    "mass_behind": Rule(
        10.0,
        100.0,
        "above",
        "The base's own draws find {figure} times the variance of the weights that the moved draws "
        "show, above {limit}: some lie where the target has mass that no moved draw reaches.",
        "Temper, or refit; look for a second mode.",
        "derived: both estimate one second moment; limits ours",
    ),
    "draws_moved": Rule(
        math.nan,
        math.nan,
        "note",
        "The draws are not the base's own: {how}.",
        "Ask for quantities by name, text or callable; answer.draws holds the new draws.",
        "exact",
    ),
    "groups_refit": Rule(
        0.5,
        1.0,
        "from",
        "The weights of {figure} of {of} {what} ask for a refit: nothing that adds them up stands.",
        "List them with untrusted(), cure them there, or fold refits in with with_refits().",
        "exact: a sum is no better than its parts",
    ),
    "groups_strained": Rule(
        1.0,
        math.inf,
        "from",
        "The weights of {figure} of {of} {what} are strained.",
        "List them with untrusted(); a refit of those alone can be folded in by with_refits().",
        "exact: a sum is no better than its parts",
    ),
    "own_latents": Rule(
        0.5,
        math.inf,
        "above",
        "Each group's density hangs on its own element of {term} (share {figure} of its variance, "
        "above {limit}): weights that condition on a group's own effect have far too heavy a tail.",
        "Integrate the groups' own effects out and pass those densities as conditional=.",
        "limiting tail index 1 for a normal hierarchy; limit ours",
    ),
    "rows_independent": Rule(
        math.nan,
        math.nan,
        "note",
        "Deletion takes the observations as independent given the parameters.",
        "For correlated rows pass conditional=, the log density of each given all the others.",
        "exact",
    ),
    "groups_sampled": Rule(
        math.nan,
        math.nan,
        "note",
        "Only {figure} of {of} groups were left out, drawn at random; a surrogate stands for all.",
        "The total carries an error from drawing beside its Monte Carlo error.",
        "counted",
    ),
    "refits_folded": Rule(
        math.nan,
        math.nan,
        "note",
        "The log scores of {figure} groups come from fits without them.",
        "Nothing to do if those fits can be trusted.",
        "counted",
    ),
    "step_shape": Rule(
        0.7,
        1.0,
        "above",
        "At one temperature the tail shape of the weights is {figure}, above {limit}: {meaning}.",
        "Read bridged_constant, which has no such tail, or start from a broader source.",
        "Vehtari, Simpson, Gelman, Yao, Gabry (2024), JMLR 25",
    ),
    "few_islands": Rule(
        8.0,
        4.0,
        "below",
        "As few as {figure} islands carry the weight, below {limit}: they found different things.",
        "Bring more particles with size=, raise efficiency=, or start from a broader source.",
        "ours",
    ),
    "constant_spread": Rule(
        0.3,
        0.8,
        "above",
        "The relative error of the ratio of constants is {figure}, above {limit}: its log is not "
        "normal.",
        "Bring more particles with size=, or raise efficiency= so that temperatures lie closer.",
        "ours",
    ),
    "sides_disagree": Rule(
        1.0,
        3.0,
        "above",
        "Looking back from the moved particles the constant is {figure} errors away, above "
        "{limit}: the mean weight misses part of the target.",
        "Read bridged_constant, or start from a broader source.",
        "ours: on targets of known constant this separates Student-t tails from all others",
    ),
    "moves_stuck": Rule(
        0.3,
        0.03,
        "below",
        "At one temperature particles moved only {figure} of the distance between independent "
        "draws, below {limit}: they are near copies of each other.",
        "Choose another move=, a parameterisation with rounder contours, or more particles.",
        "ours",
    ),
    "beyond_source": Rule(
        math.nan,
        math.nan,
        "always",
        "Moves at the target went {figure} times where the source has no density: the path from "
        "the source does not cover the target.",
        "Start from a source whose support holds the target's.",
        "exact: the ratio of constants leaves out what lies there",
    ),
    "tempering_unfinished": Rule(
        0.0,
        math.inf,
        "from",
        "The run was stopped by {why} with a share of {figure} of the path, and the moves there, "
        "still to do.",
        "Go on with resume().",
        "exact",
    ),
    "pool_overlap": Rule(
        10.0,
        3.0,
        "below",
        "The draws of {fit} share only {figure} effective draws with those of the others, below "
        "{limit}: its constant against them is hardly known.",
        "Leave that fit out, or add a fit that lies between.",
        "one over the variance of a log constant between two fits; limits ours",
    ),
    "pool_contradiction": Rule(
        1e-3,
        1e-6,
        "below",
        "The draws of {fit} contradict those of the others (p = {figure}, below {limit}): they are "
        "not distributed as the stated terms say, or the others are not.",
        "Run check() on the fit, look at its terms and its convergence, or leave it out.",
        "detailed balance between the draws of a fit and those of the others; limits ours",
    ),
}
