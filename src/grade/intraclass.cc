#include "grade/intraclass.h"

#include <fmt/format.h>

#include <algorithm>
#include <boost/math/distributions/fisher_f.hpp>
#include <cmath>

namespace laygauge {
namespace {

double FQuantile(double p, double numerator, double denominator) {
  return boost::math::quantile(boost::math::fisher_f(numerator, denominator), p);
}

struct Limits {
  double low;
  double high;
};

// Of a single rating's coefficient (F - 1) / (F + k - 1), from limits of F.
Limits SingleLimits(double f, double upper_quantile, double lower_quantile, double judges) {
  const double f_low = f / upper_quantile;
  const double f_high = f * lower_quantile;
  return {(f_low - 1) / (f_low + judges - 1), (f_high - 1) / (f_high + judges - 1)};
}

Limits MeanLimits(double f, double upper_quantile, double lower_quantile) {
  return {1 - upper_quantile / f, 1 - 1 / (f * lower_quantile)};
}

// Shrout & Fleiss's approximation (after Fleiss & Shrout 1978) for ICC(2,1).
Limits TwoWayRandomLimits(const IntraclassTable& table, double n, double k, double p) {
  const double icc = table.forms[1].value;
  const double residual = table.mean_square_residual;
  const double f_judges = table.mean_square_judges / residual;
  const double a = k * icc * f_judges;
  const double b = n * (1 + (k - 1) * icc) - k * icc;
  const double freedom = (k - 1) * (n - 1) * (a + b) * (a + b) / ((n - 1) * a * a + b * b);
  const double upper = FQuantile(p, n - 1, freedom);
  const double lower = FQuantile(p, freedom, n - 1);
  const double rest = k * table.mean_square_judges + (n * k - k - n) * residual;
  const double targets = table.mean_square_targets;
  return {n * (targets - upper * residual) / (upper * rest + n * targets),
          n * (lower * targets - residual) / (rest + n * lower * targets)};
}

void FillMeanSquares(const Eigen::MatrixXd& ratings, IntraclassTable& table) {
  const auto n = static_cast<double>(ratings.rows());
  const auto k = static_cast<double>(ratings.cols());
  const double mean = ratings.mean();
  const Eigen::VectorXd rows = ratings.rowwise().mean();
  const Eigen::RowVectorXd columns = ratings.colwise().mean();
  const double targets = k * (rows.array() - mean).square().sum();
  const double judges = n * (columns.array() - mean).square().sum();
  const double within = (ratings.colwise() - rows).squaredNorm();
  const double residual =
      ((ratings.colwise() - rows).rowwise() - (columns.array() - mean).matrix()).squaredNorm();
  table.mean_square_targets = targets / (n - 1);
  table.mean_square_judges = judges / (k - 1);
  table.mean_square_within = within / (n * (k - 1));
  table.mean_square_residual = residual / ((n - 1) * (k - 1));
}

void FillValues(double n, double k, IntraclassTable& table) {
  const double targets = table.mean_square_targets;
  const double judges = table.mean_square_judges;
  const double residual = table.mean_square_residual;
  const double within = table.mean_square_within;
  auto& forms = table.forms;
  forms[0].value = (targets - within) / (targets + (k - 1) * within);
  forms[1].value =
      (targets - residual) / (targets + (k - 1) * residual + k * (judges - residual) / n);
  forms[2].value = (targets - residual) / (targets + (k - 1) * residual);
  forms[3].value = (targets - within) / targets;
  forms[4].value = (targets - residual) / (targets + (judges - residual) / n);
  forms[5].value = (targets - residual) / targets;
  for (int i = 0; i < 6; ++i) {
    const int judges_of_form = i < 3 ? 1 : static_cast<int>(k);
    forms[static_cast<size_t>(i)].name = fmt::format("ICC({},{})", i % 3 + 1, judges_of_form);
  }
}

// Without any residual the F ratios are infinite, and so sure is the coefficient.
void FillLimits(double n, double k, double p, IntraclassTable& table) {
  auto& forms = table.forms;
  const auto set = [&forms](size_t i, Limits limits) {
    forms[i].low = limits.low;
    forms[i].high = limits.high;
  };
  if (table.mean_square_within > 0) {
    const double f = table.mean_square_targets / table.mean_square_within;
    const double upper = FQuantile(p, n - 1, n * (k - 1));
    const double lower = FQuantile(p, n * (k - 1), n - 1);
    set(0, SingleLimits(f, upper, lower, k));
    set(3, MeanLimits(f, upper, lower));
  } else {
    set(0, {1, 1});
    set(3, {1, 1});
  }
  if (table.mean_square_residual > 0) {
    const double f = table.mean_square_targets / table.mean_square_residual;
    const double upper = FQuantile(p, n - 1, (n - 1) * (k - 1));
    const double lower = FQuantile(p, (n - 1) * (k - 1), n - 1);
    const Limits random = TwoWayRandomLimits(table, n, k, p);
    set(1, random);
    set(2, SingleLimits(f, upper, lower, k));
    set(4, {random.low * k / (1 + random.low * (k - 1)),
            random.high * k / (1 + random.high * (k - 1))});
    set(5, MeanLimits(f, upper, lower));
  } else {
    for (const size_t i : {1, 2, 4, 5}) set(i, {forms[i].value, forms[i].value});
  }
}

}  // namespace

Expected<IntraclassTable> IntraclassCorrelations(const Eigen::MatrixXd& ratings,
                                                 double confidence) {
  if (ratings.rows() < 2 || ratings.cols() < 2) {
    return Unmeasurable("an intraclass correlation needs two coupons that two graders graded");
  }
  IntraclassTable table;
  FillMeanSquares(ratings, table);
  if (table.mean_square_targets <= 0) {
    return Unmeasurable("all coupons have the same mean grade, so nothing correlates");
  }
  const auto n = static_cast<double>(ratings.rows());
  const auto k = static_cast<double>(ratings.cols());
  FillValues(n, k, table);
  FillLimits(n, k, (1 + confidence) / 2, table);
  return table;
}

}  // namespace laygauge
