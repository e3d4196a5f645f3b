//! An order of the unknowns that keeps the factor of their matrix narrow.

use std::collections::VecDeque;

/// The reverse Cuthill-McKee order of a graph: at each place of the new order the number in the old one.
///
/// - **Method**: each connected part is numbered outward from one end, the neighbours of a node by their degree; the whole
///   is reversed. The end is a node from which some other is as far as can be: the last and least connected one seen from
///   any, until that helps no more.
/// - **Reference**: Cuthill & McKee 1969 (Proc. 24th Nat. Conf. ACM, 157); reversed: George 1971 (Stanford STAN-CS-71-208);
///   the end: George & Liu 1979 (ACM Trans. Math. Softw. 5, 284). All from memory.
#[must_use]
pub fn reverse_cuthill_mckee(neighbours: &[Vec<usize>]) -> Vec<usize> {
    let n = neighbours.len();
    let degree = |&node: &usize| (neighbours[node].len(), node);
    let mut starts: Vec<usize> = (0..n).collect();
    starts.sort_unstable_by_key(degree);
    let mut depth = vec![None; n];
    let mut placed = vec![false; n];
    let mut order = Vec::with_capacity(n);
    for start in starts {
        if placed[start] {
            continue;
        }
        let mut queue = VecDeque::from([end_of_part(neighbours, start, &mut depth)]);
        placed[queue[0]] = true; // just put in
        while let Some(node) = queue.pop_front() {
            order.push(node);
            let mut next: Vec<usize> = neighbours[node].clone();
            next.retain(|&other| !placed[other]);
            next.sort_unstable_by_key(degree);
            for other in next {
                placed[other] = true;
                queue.push_back(other);
            }
        }
    }
    order.reverse();
    order
}

/// A node at an end of the connected part of `start`. `depth` is empty before and after.
fn end_of_part(neighbours: &[Vec<usize>], start: usize, depth: &mut [Option<usize>]) -> usize {
    let mut best = start;
    let mut farthest = 0;
    loop {
        let mut part = vec![best];
        depth[best] = Some(0);
        let mut at = 0;
        while let Some(&node) = part.get(at) {
            let next = depth[node].map(|d| d + 1);
            for &other in &neighbours[node] {
                if depth[other].is_none() {
                    depth[other] = next;
                    part.push(other);
                }
            }
            at += 1;
        }
        let last = part.last().and_then(|&node| depth[node]).unwrap_or(0);
        let in_last = part.iter().filter(|&&node| depth[node] == Some(last));
        let candidate = in_last.min_by_key(|&&node| (neighbours[node].len(), node));
        let candidate = candidate.copied().unwrap_or(best);
        for &node in &part {
            depth[node] = None;
        }
        if last <= farthest {
            return best;
        }
        (best, farthest) = (candidate, last);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Largest distance between neighbours in an order.
    fn bandwidth(neighbours: &[Vec<usize>], order: &[usize]) -> usize {
        let mut place = vec![0; order.len()];
        for (k, &node) in order.iter().enumerate() {
            place[node] = k;
        }
        let pairs = neighbours.iter().enumerate();
        let pairs = pairs.flat_map(|(a, of)| of.iter().map(move |&b| (a, b)));
        let apart = pairs.map(|(a, b)| place[a].abs_diff(place[b]));
        apart.max().unwrap_or(0)
    }

    fn graph(n: usize, edges: &[(usize, usize)]) -> Vec<Vec<usize>> {
        let mut neighbours = vec![Vec::new(); n];
        for &(a, b) in edges {
            neighbours[a].push(b);
            neighbours[b].push(a);
        }
        neighbours
    }

    #[test]
    fn a_path_in_any_order_becomes_a_path() {
        // The best bandwidth of a path is 1.
        let names = [4, 0, 6, 2, 5, 1, 3];
        let edges: Vec<_> = names.windows(2).map(|w| (w[0], w[1])).collect();
        let path = graph(7, &edges);
        let order = reverse_cuthill_mckee(&path);
        assert_eq!(bandwidth(&path, &order), 1);
    }

    #[test]
    fn a_long_grid_is_numbered_across() {
        // 5 by 40 with numbers that run along it: bandwidth 40 before, some 5 across.
        let at = |i: usize, j: usize| i * 40 + j;
        let mut edges = Vec::new();
        for i in 0..5 {
            for j in 0..40 {
                if i + 1 < 5 {
                    edges.push((at(i, j), at(i + 1, j)));
                }
                if j + 1 < 40 {
                    edges.push((at(i, j), at(i, j + 1)));
                }
            }
        }
        let grid = graph(200, &edges);
        let order = reverse_cuthill_mckee(&grid);
        assert!(bandwidth(&grid, &order) <= 6);
        let mut sorted = order;
        sorted.sort_unstable();
        assert_eq!(sorted, (0..200).collect::<Vec<_>>());
    }

    #[test]
    fn parts_and_single_nodes_are_all_placed() {
        let graph = graph(6, &[(0, 4), (4, 2), (1, 5)]);
        let mut order = reverse_cuthill_mckee(&graph);
        assert_eq!(bandwidth(&graph, &order), 1);
        order.sort_unstable();
        assert_eq!(order, [0, 1, 2, 3, 4, 5]);
        assert!(reverse_cuthill_mckee(&[]).is_empty());
    }
}
