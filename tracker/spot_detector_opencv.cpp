#include "tracker/spot_detector.h"

#include <opencv2/core.hpp>
#include <opencv2/imgproc.hpp>

#include <algorithm>
#include <cmath>
#include <vector>

struct RfSpotDetector {
    cv::Mat picture[RF_SPOT_DETECTOR_SIZES];
    cv::Mat filtered[RF_SPOT_DETECTOR_SIZES];
    std::vector<RfCandidate> found;
};

namespace
{

/* Binomial of order 4: variance 1 cell^2 either way; its squares sum to 70/256 in one direction. */
const cv::Mat &kernel()
{
    static const cv::Mat binomial =
        (cv::Mat_<float>(1, 5) << 1 / 16.f, 4 / 16.f, 6 / 16.f, 4 / 16.f, 1 / 16.f);
    return binomial;
}

bool is_peak(const cv::Mat &m, int x, int y)
{
    float v = m.at<float>(y, x);
    for (int dy = -1; dy <= 1; dy++)
        for (int dx = -1; dx <= 1; dx++) {
            if ((!dx && !dy) || x + dx < 0 || y + dy < 0 || x + dx >= m.cols || y + dy >= m.rows) continue;
            float other = m.at<float>(y + dy, x + dx);
            bool is_before = dy < 0 || (dy == 0 && dx < 0); /* of equal neighbours, the first one counts */
            if (is_before ? other >= v : other > v) return false;
        }
    return true;
}

/* Top of the parabola through three neighbours, -0.5..0.5. */
float vertex(float before, float here, float after)
{
    float bend = before - 2 * here + after;
    return bend < 0 ? std::clamp(0.5f * (before - after) / bend, -0.5f, 0.5f) : 0.f;
}

RfCandidate candidate_at(const cv::Mat &m, int x, int y, int size, float noise_sd)
{
    float v = m.at<float>(y, x), dx = 0, dy = 0;
    if (x > 0 && x < m.cols - 1) dx = vertex(m.at<float>(y, x - 1), v, m.at<float>(y, x + 1));
    if (y > 0 && y < m.rows - 1) dy = vertex(m.at<float>(y - 1, x), v, m.at<float>(y + 1, x));
    float cells = static_cast<float>(1 << size);
    return {(x + dx + 0.5f) * cells - 0.5f, (y + dy + 0.5f) * cells - 0.5f, v / noise_sd, size};
}

void collect(const cv::Mat &m, int size, const RfSpotDetectorSettings &settings,
             std::vector<RfCandidate> &found)
{
    float least = settings.threshold[size] * settings.noise_sd[size];
    for (int y = 0; y < m.rows; y++) {
        const float *row = m.ptr<float>(y);
        int x = 0;
        for (; x + 16 <= m.cols; x += 16) { /* nearly all sixteens hold nothing */
            float most = row[x];
            for (int i = 1; i < 16; i++) most = row[x + i] > most ? row[x + i] : most;
            if (most <= least) continue;
            for (int i = 0; i < 16; i++)
                if (row[x + i] > least && is_peak(m, x + i, y))
                    found.push_back(candidate_at(m, x + i, y, size, settings.noise_sd[size]));
        }
        for (; x < m.cols; x++)
            if (row[x] > least && is_peak(m, x, y))
                found.push_back(candidate_at(m, x, y, size, settings.noise_sd[size]));
    }
}

/* Two sharp spots side by side add up in a wide filter, so a wider one must win clearly. */
float standing(const RfCandidate &c)
{
    static const float handicap[RF_SPOT_DETECTOR_SIZES] = {1.f, 1 / 1.15f, 1 / (1.15f * 1.15f)};
    return c.strength * handicap[c.size];
}

bool stands_higher(const RfCandidate &a, const RfCandidate &b)
{
    if (standing(a) != standing(b)) return standing(a) > standing(b);
    if (a.y != b.y) return a.y < b.y;
    return a.x != b.x ? a.x < b.x : a.size < b.size;
}

/* Is it another filter's view of a spot that is already taken? */
bool is_known(const RfCandidate &c, const RfCandidate *taken, int n)
{
    for (int i = 0; i < n; i++) {
        if (taken[i].size == c.size) continue;
        float reach = 1.6f * static_cast<float>(1 << std::max(c.size, taken[i].size));
        float dx = taken[i].x - c.x, dy = taken[i].y - c.y;
        if (dx * dx + dy * dy < reach * reach) return true;
    }
    return false;
}

} // namespace

extern "C" {

RfSpotDetector *rf_spot_detector_new(int width, int height)
{
    try {
        cv::setNumThreads(0);
        auto *detector = new RfSpotDetector;
        for (int i = 0; i < RF_SPOT_DETECTOR_SIZES; i++)
            detector->picture[i] = cv::Mat::zeros(height >> i, width >> i, CV_32F);
        return detector;
    } catch (...) {
        return nullptr;
    }
}

void rf_spot_detector_free(RfSpotDetector *detector)
{
    delete detector;
}

float *rf_spot_detector_picture(RfSpotDetector *detector)
{
    return detector->picture[0].ptr<float>();
}

bool rf_spot_detector_filter(RfSpotDetector *detector)
{
    try {
        for (int i = 0; i < RF_SPOT_DETECTOR_SIZES; i++) {
            if (i) {
                cv::Mat even = detector->picture[i - 1](
                    cv::Rect(0, 0, detector->picture[i].cols * 2, detector->picture[i].rows * 2));
                cv::resize(even, detector->picture[i], detector->picture[i].size(), 0, 0, cv::INTER_AREA);
                detector->picture[i] *= 2; /* a mean of four has half the sd */
            }
            cv::sepFilter2D(detector->picture[i], detector->filtered[i], CV_32F, kernel(), kernel(),
                            cv::Point(-1, -1), 0, cv::BORDER_REFLECT_101);
        }
        return true;
    } catch (...) {
        return false;
    }
}

const float *rf_spot_detector_filtered(const RfSpotDetector *detector, int size, int *width, int *height)
{
    *width = detector->filtered[size].cols;
    *height = detector->filtered[size].rows;
    return detector->filtered[size].ptr<float>();
}

int rf_spot_detector_search(RfSpotDetector *detector, const RfSpotDetectorSettings *settings,
                            RfCandidate *candidates, int most)
{
    try {
        detector->found.clear();
        for (int i = 0; i < RF_SPOT_DETECTOR_SIZES; i++)
            collect(detector->filtered[i], i, *settings, detector->found);
        std::sort(detector->found.begin(), detector->found.end(), stands_higher);
        if (detector->found.size() > 4 * static_cast<size_t>(most))
            detector->found.resize(4 * static_cast<size_t>(most));
        int n = 0;
        for (const RfCandidate &c : detector->found)
            if (n < most && !is_known(c, candidates, n)) candidates[n++] = c;
        return n;
    } catch (...) {
        return 0;
    }
}

double rf_spot_detector_white_sd(void)
{
    return 70.0 / 256.0;
}
}
