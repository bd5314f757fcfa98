// SPDX-License-Identifier: Apache-2.0
#pragma once

/// What two hypotheses that the data hardly tell apart leave to any procedure whatever. The truth T is what made a scan;
/// the imposter I is another scan, with another right answer, whose counts are nearly the same. What a procedure owes to I
/// it cannot at once do for T:
/// - Of all events of probability at most a under I, none is more probable under T than that the likelihood ratio is large
///   (J. Neyman, E. S. Pearson, Phil. Trans. R. Soc. A 231, 289 (1933)); that probability is power(a) below. "Refused",
///   "the interval holds T's answer" and unions of these are such events, so power() bounds them, whoever computes them
///   from whatever part of the data.
/// - This is Le Cam's two-point method (B. Yu, "Assouad, Fano, and Le Cam", in Festschrift for Lucien Le Cam, Springer
///   (1997), p. 423), with the whole trade between the two errors in place of the total variation.
/// The log likelihood ratio is a sum over points, taken as normal with its exact means and variances under either
/// hypothesis; where T is near I, both variances are the deviance lambda between them, and power(a) = Phi(sqrt(lambda) -
/// z_(1-a)).
namespace halfturn::campaign {

/// ln(P_T / P_I) of data under either hypothesis, gathered over independent readings.
struct Apart {
  double mean_true = 0, variance_true = 0;          // where T holds: the Kullback-Leibler distance of T to I
  double mean_imposter = 0, variance_imposter = 0;  // where I holds: less that of I to T

  void add_binomial(double shots, double p_true, double p_imposter);  // probabilities within 1e-12 of 0 or 1 count as that
  void add_normal(double shift);                                      // means apart by so many standard deviations
  double deviance() const { return 2 * mean_true; }                   // lambda
};

/// The largest probability under T of an event of probability at most `size` under I. 0 and 1 where size <= 0 and >= 1;
/// `size` where nothing tells the two apart.
double power(const Apart& apart, double size);

/// How far an interval may reach beyond an efficient estimate, in its standard deviations: of intervals at most `stretch`
/// >= 1 times as long as the symmetric one of coverage `high`, wherever about the estimate they are put, the farthest that
/// still covers with `low` <= `high` < 1.
double reach(double low, double high, double stretch = 1);

/// The share of scans of I whose answer may lie `beyond` > 0 or more standard deviations from where it belongs, the rest
/// being efficient: as many as a coverage of `low` lets go astray, and a root mean square of 1.05 times the Cramer-Rao
/// bound, (1.05^2 - 1) / beyond^2 (P. L. Chebyshev). Without it an answer could not be told at all from T's by a normal
/// law, however far off that is; but a procedure may choose between the two by a test, and every test errs.
double astray(double beyond, double low);

/// How intervals fare on scans of I: they reach by `reach` standard deviations from an efficient (normal, unbiased)
/// estimate, and cover with `low`.
struct Intervals {
  double reach = 0, low = 0;
};

/// The most that an interval covers T's answer, which lies `away` standard deviations from I's: the power at Phi(reach -
/// away) and what goes astray.
double most_covered(const Apart& apart, double away, const Intervals& intervals);

/// The least probability of a scan of T being used with an interval that does not hold its answer, where scans of I are
/// refused with at most `refused`: the event "refused, or the interval holds T's answer" has at most `refused` plus the
/// above's under I.
double least_missed(const Apart& apart, double away, const Intervals& intervals, double refused);

/// Whose answers are bounded.
enum class Answers {
  any,      // any that are not wrong on scans of I
  maximum,  // on scans of I at the likelihood's maximum, as an efficient estimate is
};

/// The least probability of a scan of T being wrong as score.hpp says it (used, off by more than 50 mrad, a deviance above
/// 25 held against the truth; of an answer that is none of the likelihood's maximum, against the answer), where scans of I
/// are refused with at most `refused`. Given: `off`, by how much their answers differ, rad; `held`, the deviance that
/// expected counts of T hold against T's answer. With s = off / sqrt(held) the standard deviation of the maximum, normal
/// about I's answer: `maximum` is wrong where the maximum lies more than 5 s and more than 50 mrad from T's answer. An
/// answer that is `any` may lie up to 50 mrad, or 5 s from the maximum, towards T's without being wrong on I: it is wrong
/// on T where still 50 mrad are left. These events depend on the data along the model that I belongs to; the likelihood
/// ratio on what is orthogonal to that, I being the best of it. So they are independent, of one probability q under both,
/// and refusals are spent best within them: q (1 - power(refused / q)), 0 where q <= refused.
double least_wrong(const Apart& apart, double off, double held, double refused, Answers answers);

}  // namespace halfturn::campaign
