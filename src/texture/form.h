#pragma once

#include <opencv2/core.hpp>

namespace laygauge {

// Takes the form off an image: the polynomial of second order in x and y that fits it best
// (weighted least squares), which is uneven light and gloss for the most part. What is left has
// the weighted mean 0.
// values: CV_32FC1; weights: CV_8UC1 or CV_32FC1, same size, 0 where the values do not count. Only
// every `step`-th pixel on either axis is fitted to.
// Source: ISO 25178-2:2021 (F-operation), on gray values.
void RemoveForm(cv::Mat& values, const cv::Mat& weights, int step = 1);

}  // namespace laygauge
