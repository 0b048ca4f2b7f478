#include <windage/plant/linear_plant.hpp>

#include <algorithm>
#include <stdexcept>

#include <windage/plant/matrix_exponential.hpp>

namespace windage {

struct linear_plant::sampled {
    Eigen::MatrixXd phi, before, after, w, c;
};

namespace {

bool all_constant(const std::vector<lane_value>& values) {
    return std::all_of(values.begin(), values.end(), [](const lane_value& v) { return v.is_constant(); });
}

// The lag as one more state: the plant's input is that state, the command drives the lag.
linear_model with_lag(const linear_model& m, double time_constant) {
    const Eigen::Index n = m.a.rows(), w = m.e.cols();
    linear_model out{Eigen::MatrixXd::Zero(n + 1, n + 1), Eigen::MatrixXd::Zero(n + 1, 1),
                     Eigen::MatrixXd::Zero(n + 1, w), Eigen::MatrixXd::Zero(1, n + 1)};
    out.a.topLeftCorner(n, n) = m.a;
    out.a.topRightCorner(n, 1) = m.b;
    out.a(n, n) = -1.0 / time_constant;
    out.b(n, 0) = 1.0 / time_constant;
    out.e.topRows(n) = m.e;
    out.c.leftCols(n) = m.c;
    return out;
}

// exp([A B E; 0 0 0] h) = [Phi Gamma_u Gamma_w; 0 I] (Van Loan 1978, IEEE TAC 23(3) 395-404); the upper rows of it.
Eigen::MatrixXd transition(const linear_model& m, double h) {
    const Eigen::Index n = m.a.rows(), w = m.e.cols();
    Eigen::MatrixXd all = Eigen::MatrixXd::Zero(n + 1 + w, n + 1 + w);
    all.topLeftCorner(n, n) = m.a * h;
    all.block(0, n, n, 1) = m.b * h;
    all.topRightCorner(n, w) = m.e * h;
    return matrix_exponential(all).topRows(n);
}

} // namespace

linear_plant::linear_plant(const plant_description& d, number lag, bool split, const plant_disturbances& w,
                           signal_arena& arena)
    : d_(d), w_(w), size_(arena.block_size()), states_(int(d.states.size())), order_(states_),
      has_lag_(!lag.is_constant(0.0)), split_(split), lag_(lag, arena) {
    if (has_lag_) ++order_;
    if (d.kind != plant_kind::state_space && w.count() > 1)
        throw std::invalid_argument("plant: this stock plant has one disturbance; use a state-space plant for more");
    realise(d, std::vector<double>(d.numbers.size(), 1.0)); // refuses wrong counts now rather than in a campaign
    if (d.initial_state.size() != d.states.size())
        throw std::invalid_argument("plant: one initial state a state is expected");
    for (const number& n : d.numbers) numbers_.emplace_back(n, arena);
    for (const number& n : d.initial_state) initial_state_.emplace_back(n, arena);
    const std::size_t n = order_;
    x_ = arena.take(n);
    next_ = arena.take(n);
    output_ = arena.take();
    middle_ = arena.take();
    phi_ = arena.take(n * n);
    before_ = arena.take(n);
    after_ = arena.take(n);
    gamma_w_ = arena.take(n * std::max(1, w.count()));
    c_ = arena.take(n);
    for (int k = 0; k < w.count(); ++k) w_middle_.push_back(arena.take());
}

void linear_plant::begin(const trial_block& trials, constant_signal sample_period, constant_signal fraction,
                         const lane_value& initial_command) {
    lag_.begin(trials);
    for (lane_value& n : numbers_) n.begin(trials);
    for (int i = 0; i < states_; ++i) {
        initial_state_[i].begin(trials);
        std::copy_n(initial_state_[i].data(), size_, x_ + i * size_);
    }
    if (has_lag_) std::copy_n(initial_command.data(), size_, x_ + states_ * size_);
    std::vector<double> numbers(numbers_.size());
    double period = 0.0, phi = 0.0, lag = 0.0;
    linear_model model = realise(d_, std::vector<double>(numbers.size(), 1.0));
    sampled now = sample_exactly(model, 1.0, 0.0);
    const bool same_plant = all_constant(numbers_) && lag_.is_constant();
    for (std::size_t lane = 0; lane < size_; ++lane) {
        const bool same = lane > 0 && same_plant && sample_period[lane] == period && fraction[lane] == phi;
        if (!same) {
            for (std::size_t k = 0; k < numbers.size(); ++k) numbers[k] = numbers_[k][lane];
            period = sample_period[lane];
            phi = fraction[lane];
            lag = lag_[lane];
            model = realise(d_, numbers);
            now = sample_exactly(has_lag_ ? with_lag(model, lag) : model, period, phi);
        }
        store(now, lane);
    }
}

linear_plant::sampled linear_plant::sample_exactly(const linear_model& m, double period, double fraction) const {
    const Eigen::Index n = m.a.rows(), w = m.e.cols();
    const Eigen::MatrixXd last = transition(m, split_ ? period - fraction : period);
    const Eigen::MatrixXd phi = last.leftCols(n), gamma_w = last.rightCols(w);
    if (!split_) return {phi, Eigen::MatrixXd::Zero(n, 1), last.col(n), gamma_w, m.c};
    const Eigen::MatrixXd first = phi.lazyProduct(transition(m, fraction));
    return {first.leftCols(n), first.col(n), last.col(n), first.rightCols(w) + gamma_w, m.c};
}

void linear_plant::store(const sampled& s, std::size_t lane) {
    const auto put = [&](signal to, const Eigen::MatrixXd& m, int columns) {
        for (int i = 0; i < int(m.rows()); ++i)
            for (int j = 0; j < columns; ++j) to[std::size_t(i * columns + j) * size_ + lane] = m(i, j);
    };
    put(phi_, s.phi, order_);
    put(before_, s.before, 1);
    put(after_, s.after, 1);
    put(gamma_w_, s.w, w_.count());
    put(c_, s.c, order_);
}

void linear_plant::evaluate_output(constant_signal, constant_signal) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide y = 0.0;
        for (int k = 0; k < order_; ++k) y += wide::load(c_ + k * size_ + i) * wide::load(x_ + k * size_ + i);
        y.store(output_ + i);
    });
}

void linear_plant::advance(const sample_interval& interval) {
    std::vector<constant_signal>& w = middle_values_;
    w.clear();
    if (!w_.are_held())
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            (wide::load(interval.time + i) + 0.5 * wide::load(interval.period + i)).store(middle_ + i);
        });
    for (int k = 0; k < w_.count(); ++k) {
        if (!w_.are_held()) w_.evaluate(k, middle_, false, w_middle_[k]);
        w.push_back(w_.are_held() ? w_.now(k) : w_middle_[k]);
    }
    const int n = order_, count = int(w.size());
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide after = wide::load(interval.after + i);
        for (int r = 0; r < n; ++r) {
            wide sum = wide::load(after_ + r * size_ + i) * after;
            if (split_) sum += wide::load(before_ + r * size_ + i) * wide::load(interval.before + i);
            for (int k = 0; k < n; ++k)
                sum += wide::load(phi_ + std::size_t(r * n + k) * size_ + i) * wide::load(x_ + k * size_ + i);
            for (int k = 0; k < count; ++k)
                sum += wide::load(gamma_w_ + std::size_t(r * count + k) * size_ + i) * wide::load(w[k] + i);
            sum.store(next_ + r * size_ + i);
        }
        for (int r = 0; r < n; ++r) wide::load(next_ + r * size_ + i).store(x_ + r * size_ + i);
    });
}

} // namespace windage
