//! A closed triangulation whose triangles know their neighbours: bisecting and flipping edges.

use std::collections::BTreeMap;

/// A closed oriented triangulation. Edge `i` of a triangle runs from corner `i` to corner `i + 1`, and
/// `neighbours[t][i]` is the triangle on its other side. Every operation keeps it closed and conforming.
#[derive(Clone, Debug)]
pub(super) struct Linked {
    pub(super) corners: Vec<[u32; 3]>,
    pub(super) neighbours: Vec<[u32; 3]>,
}

/// The entry after `i` in a triangle.
pub(super) const fn next(i: usize) -> usize {
    if i == 2 { 0 } else { i + 1 }
}

/// The entry before `i` in a triangle.
pub(super) const fn before(i: usize) -> usize {
    if i == 0 { 2 } else { i - 1 }
}

impl Linked {
    /// Links triangles that already form a closed oriented surface; `None` when an edge has no partner.
    pub(super) fn new(corners: Vec<[u32; 3]>) -> Option<Self> {
        let mut owner = BTreeMap::new();
        for (t, c) in corners.iter().enumerate() {
            for i in 0..3 {
                owner.insert((c[i], c[next(i)]), u32::try_from(t).ok()?);
            }
        }
        let mut neighbours = Vec::with_capacity(corners.len());
        for c in &corners {
            let mut row = [0; 3];
            for i in 0..3 {
                row[i] = *owner.get(&(c[next(i)], c[i]))?;
            }
            neighbours.push(row);
        }
        Some(Self { corners, neighbours })
    }

    /// The number of triangles.
    pub(super) fn len(&self) -> usize {
        self.corners.len()
    }

    /// Edge `i` of triangle `t` as the triangle on the other side sees it.
    pub(super) fn across(&self, t: usize, i: usize) -> (usize, usize) {
        let u = self.neighbours[t][i] as usize;
        let b = self.corners[t][next(i)];
        let j = (0..3).find(|j| self.corners[u][*j] == b).unwrap_or(0);
        (u, j)
    }

    /// Puts vertex `m` on edge `i` of triangle `t`: both triangles at the edge are halved. Returns the four
    /// triangles at `m`; the first two are `t` and its new half.
    pub(super) fn bisect(&mut self, t: usize, i: usize, m: u32) -> [usize; 4] {
        let (u, j) = self.across(t, i);
        let [a, b, c] = [self.corners[t][i], self.corners[t][next(i)], self.corners[t][before(i)]];
        let d = self.corners[u][before(j)];
        let (t_bc, t_ca) = (self.neighbours[t][next(i)], self.neighbours[t][before(i)]);
        let (u_ad, u_db) = (self.neighbours[u][next(j)], self.neighbours[u][before(j)]);
        let (t2, u2) = (self.len(), self.len() + 1);
        let [nt, nu, nt2, nu2] = [t, u, t2, u2].map(index);
        self.repoint(t_bc, nt, nt2, c);
        self.repoint(u_ad, nu, nu2, d);
        self.corners[t] = [a, m, c];
        self.neighbours[t] = [nu2, nt2, t_ca];
        self.corners[u] = [b, m, d];
        self.neighbours[u] = [nt2, nu2, u_db];
        self.corners.push([m, b, c]);
        self.neighbours.push([nu, t_bc, nt]);
        self.corners.push([m, a, d]);
        self.neighbours.push([nt, u_ad, nu]);
        [t, t2, u, u2]
    }

    /// Replaces edge `i` of triangle `t`, the diagonal of two triangles, by their other diagonal. Returns
    /// the two triangles. The caller sees to it that the other diagonal is not an edge already.
    pub(super) fn flip(&mut self, t: usize, i: usize) -> [usize; 2] {
        let (u, j) = self.across(t, i);
        let [a, b, c] = [self.corners[t][i], self.corners[t][next(i)], self.corners[t][before(i)]];
        let d = self.corners[u][before(j)];
        let (t_bc, t_ca) = (self.neighbours[t][next(i)], self.neighbours[t][before(i)]);
        let (u_ad, u_db) = (self.neighbours[u][next(j)], self.neighbours[u][before(j)]);
        let (nt, nu) = (index(t), index(u));
        self.repoint(t_bc, nt, nu, c);
        self.repoint(u_ad, nu, nt, d);
        self.corners[t] = [c, a, d];
        self.neighbours[t] = [t_ca, u_ad, nu];
        self.corners[u] = [d, b, c];
        self.neighbours[u] = [u_db, t_bc, nt];
        [t, u]
    }

    /// Tells triangle `of` that its neighbour `old` across the edge that starts at `start` is now `new`.
    fn repoint(&mut self, of: u32, old: u32, new: u32, start: u32) {
        let of = of as usize;
        for i in 0..3 {
            if self.neighbours[of][i] == old && self.corners[of][i] == start {
                self.neighbours[of][i] = new;
            }
        }
    }
}

/// The number of a triangle in the table of neighbours; the sampler keeps counts below `u32::MAX`.
fn index(t: usize) -> u32 {
    u32::try_from(t).unwrap_or(u32::MAX)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn octahedron() -> Linked {
        let ring = [0_u32, 1, 2, 3];
        let mut corners = Vec::new();
        for k in 0..4 {
            let (a, b) = (ring[k], ring[(k + 1) % 4]);
            corners.push([a, b, 4]);
            corners.push([b, a, 5]);
        }
        Linked::new(corners).unwrap()
    }

    fn assert_linked(l: &Linked) {
        let again = Linked::new(l.corners.clone()).unwrap();
        assert_eq!(again.neighbours, l.neighbours);
        for t in 0..l.len() {
            for i in 0..3 {
                let (u, j) = l.across(t, i);
                assert_eq!(l.across(u, j), (t, i));
            }
        }
    }

    #[test]
    fn every_bisection_and_flip_keeps_the_links() {
        let mut l = octahedron();
        assert_linked(&l);
        for step in 0..200_usize {
            let m = u32::try_from(6 + step).unwrap();
            let t = (step * 37) % l.len();
            let made = l.bisect(t, step % 3, m);
            assert!(made.iter().all(|t| l.corners[*t].contains(&m)));
            assert_linked(&l);
            // turn the first edge that does not start or end at m: its other diagonal is new
            let i =
                (0..3).find(|i| l.corners[made[0]][*i] != m && l.corners[made[0]][next(*i)] != m).unwrap();
            let (u, j) = l.across(made[0], i);
            let far = l.corners[u][before(j)];
            if !l.corners.iter().any(|c| c.contains(&m) && c.contains(&far)) {
                l.flip(made[0], i);
                assert_linked(&l);
            }
        }
        assert_eq!(l.len(), 8 + 400);
    }

    #[test]
    fn an_open_surface_is_refused() {
        assert!(Linked::new(vec![[0, 1, 2]]).is_none());
    }
}
