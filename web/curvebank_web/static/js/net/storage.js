// The browser's storage, or a stand-in for as long as the page lives where storage is forbidden.

const memory = new Map();

export const storage = {
  getItem(key) {
    try {
      return localStorage.getItem(key);
    } catch {
      return memory.get(key) ?? null;
    }
  },
  setItem(key, value) {
    try {
      localStorage.setItem(key, value);
    } catch (error) {
      if (error.name === "QuotaExceededError") throw error;
      memory.set(key, value);
    }
  },
  removeItem(key) {
    try {
      localStorage.removeItem(key);
    } catch {
      memory.delete(key);
    }
  },
};
